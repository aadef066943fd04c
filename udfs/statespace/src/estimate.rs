//! Maximum likelihood by trust-region scoring with the average information.
//!
//! The estimation owns no likelihood: a [`Search`] asks a [`Question`] (a point, with or without derivatives), is told the
//! [`Answer`], and asks the next one until it knows enough. So one caller may drive one search with one likelihood
//! ([`maximise`]), and another as many searches as it has lanes, each with its own pace.
//!
//! * `search`: the stages of a search, from the starts to the estimate.
//! * `ordinates`, `spectrum`, `approach`: an approximate likelihood in the frequency domain, and where it says that the exact one is worth climbing.
//! * `climb`: one climb from one start.
//! * `scoring`: the step; `point`: what is known at a point; `layout`: the parameters.
//!
//! No optimiser crate offers scoring with a caller's own curvature and bounds that are part of the answer, which is why this one
//! is here.

mod approach;
mod climb;
mod layout;
mod ordinates;
mod point;
mod scoring;
mod search;
mod spectrum;

pub(crate) use point::EXACT;
pub(crate) use search::Search;

use crate::evaluation::EvaluationError;
use crate::objective::Objective;

/// The result of an estimation.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Estimate {
    /// All parameters in natural units, known ones included.
    pub(crate) values: Vec<f64>,
    /// Standard errors; NaN for known parameters, zeros, and directions that the data leave flat.
    pub(crate) std_errors: Vec<f64>,
    pub(crate) log_likelihood: f64,
    pub(crate) converged: bool,
    pub(crate) evaluations: usize,
}

/// What a search wants to know next.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Question<'a> {
    /// The point, natural units.
    pub(crate) values: &'a [f64],
    /// Score and information are wanted too.
    pub(crate) derivatives: bool,
}

/// The likelihood at one point and what its shape needs.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Answer<'a> {
    pub(crate) log_likelihood: f64,
    /// Residual sum of squares of the reduced rows: `n - d` at the best common scale of all variances.
    pub(crate) rss: f64,
    /// n - d.
    pub(crate) degrees: f64,
    /// Score, natural units; empty where it was not asked for.
    pub(crate) gradient: &'a [f64],
    /// Average information, row-major, natural units; empty where it was not asked for.
    pub(crate) information: &'a [f64],
}

/// Estimates the parameters that `known` leaves open (`None`). `observed`: the series, for the size of the starts.
///
/// # Errors
/// When the likelihood cannot be evaluated at any start.
pub(crate) fn maximise(
    objective: &mut Objective<'_>,
    known: &[Option<f64>],
    observed: &[f64],
) -> Result<Estimate, EvaluationError> {
    let mut search = Search::new(&objective.model, known, observed, objective.instructions());
    while let Some(question) = search.ask() {
        let answer = objective.answer(question);
        search.tell(answer);
    }
    search.finish()
}
