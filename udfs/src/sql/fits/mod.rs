//! Fits as values: an aggregate makes them, scalar functions forecast from them, sum them up and advance them.
//!
//! What a fit is, as a struct, is the business of [`crate::columns::fit_value`]; the files here read arguments and write answers.
//!
//! - [`structural_fit`] and its [`accumulator`]: the rows of a group to a fit,
//! - [`fit_forecast`], [`fit_summary`], [`fit_advance`]: one fit a row,
//! - [`lists`]: arguments that are lists of times and numbers.

mod accumulator;
mod fit_advance;
mod fit_forecast;
mod fit_summary;
mod lists;
mod structural_fit;

use datafusion::logical_expr::{AggregateUDF, DocSection, ScalarUDF};

use super::watch::Watch;

/// The scalar functions.
pub(crate) fn scalars(watch: &Watch) -> Vec<ScalarUDF> {
    vec![
        ScalarUDF::from(fit_forecast::FitForecast::new(watch.clone())),
        ScalarUDF::from(fit_summary::FitSummary::new()),
        ScalarUDF::from(fit_advance::FitAdvance::new(watch.clone())),
    ]
}

/// The aggregate.
pub(crate) fn aggregates(watch: &Watch) -> Vec<AggregateUDF> {
    vec![AggregateUDF::from(structural_fit::StructuralFit::new(watch.clone()))]
}

/// The section of the reference that the scalar functions stand in.
const SECTION: DocSection = DocSection { include: true, label: "Fits as values", description: None };
