//! A fit as a value: a struct of plain Arrow types that goes to Parquet and comes back bit for bit.
//!
//! The layout has a version, and fields are found by name (those of the small structs in its lists by position): order, string views and large
//! lists, which readers of files like to change, do not matter. [`FIT_LAYOUT`] says what each field holds. Everything that tomorrow needs is in there ([`Standing`], the rule of the grid, the last time), and the observations are
//! not. A series that could not be fitted is a value too, with its status and message and NULL elsewhere.

mod read;
mod write;

use std::sync::Arc;

use arrow::datatypes::{DataType, Field, FieldRef, Fields};
use stillwell_statespace::Standing;

use super::time::TimeKind;
use super::time_grid::{GridRule, TimeGrid};

pub(crate) use read::{FitColumn, ReadError};
pub(crate) use write::{FitBuilder, parameter_columns};

/// The version of the layout that is written, and the newest that can be read.
pub(crate) const LAYOUT_VERSION: i32 = 1;

/// One fit.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct FitValue {
    /// 'ok', or what is wrong with the series.
    pub(crate) status: String,
    /// Why the rows that were handed in last were not taken; absent where they were.
    pub(crate) refused: Option<String>,
    /// The sentence about the status, or about the refusal.
    pub(crate) message: Option<String>,
    /// What is known of the series; absent where it could not be fitted.
    pub(crate) fitted: Option<FittedValue>,
}

/// What is known of a fitted series.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct FittedValue {
    pub(crate) standing: Standing,
    pub(crate) rule: GridRule,
    /// Step of the grid in words.
    pub(crate) every: String,
    /// Stored times of the first and the last observation.
    pub(crate) first_at: i64,
    pub(crate) last_at: i64,
}

impl FitValue {
    /// The series in words; a value does not know its key.
    pub(crate) fn describe(&self, time: &TimeKind) -> String {
        let format = |stored| time.axis().format(stored);
        self.fitted.as_ref().map_or_else(
            || "a series without a fit".to_string(),
            |fitted| format!("a fit from {} to {}", format(fitted.first_at), format(fitted.last_at)),
        )
    }
}

impl FittedValue {
    /// The grid whose point 0 is the last observation.
    pub(crate) fn grid(&self, time: &TimeKind) -> Option<TimeGrid> {
        TimeGrid::resumed(time, &self.rule, self.last_at)
    }
}

/// The type of a fit over times of this type.
pub(crate) fn fit_type(time: &DataType) -> DataType {
    DataType::Struct(fit_fields(time))
}

/// A nullable field.
pub(super) fn field(name: &str, data_type: DataType) -> FieldRef {
    Arc::new(Field::new(name, data_type, true))
}

/// A list of nullable items.
pub(crate) fn list_of(data_type: DataType) -> DataType {
    DataType::List(Arc::new(Field::new_list_field(data_type, true)))
}

fn season_fields() -> Fields {
    Fields::from(vec![
        field("period", DataType::Float64),
        field("harmonics", DataType::Int32),
        field("fixed", DataType::Boolean),
    ])
}

/// Fields of a parameter, also in summaries.
pub(crate) fn parameter_fields() -> Fields {
    Fields::from(vec![
        field("name", DataType::Utf8),
        field("value", DataType::Float64),
        field("std_error", DataType::Float64),
        field("known", DataType::Boolean),
    ])
}

/// What each field of a fit, the struct that `structural_fit` gives, holds: names of fields and their meaning.
pub const FIT_LAYOUT: &[(&str, &str)] = &[
    ("layout_version", "version of this layout, 1"),
    ("status", "'ok', or what is wrong with the series"),
    ("refused", "why the rows handed in last were not taken, a status; NULL where they were"),
    ("message", "the sentence about the status or the refusal"),
    ("first_at, last_at", "times of the first and the last observation, type of `at`"),
    ("every", "step of the grid in words"),
    (
        "step_units",
        "the step in units of the stored time: days of a DATE, ticks of a TIMESTAMP, or integers; NULL for months",
    ),
    ("step_months", "the step in months"),
    ("anchor_day", "day of the month on which a grid of months stands, 31 for the last one"),
    ("time_of_day", "time of day shared on the wall clock of a zone, in ticks; NULL for other grids"),
    ("points, n", "grid points from the first to the last observation, and observed ones among them"),
    ("diffuse", "diffuse elements"),
    (
        "trend, seasons, cycle_shortest, cycle_longest, autoregression",
        "the structure; `seasons` as structs of period, harmonics (NULL = dummy form) and fixed",
    ),
    ("drivers, drifting_drivers", "names of the drivers with constant and with random-walk coefficients"),
    ("transform, transform_power, power_estimated", "the scale of the model"),
    (
        "parameters",
        "structs of name, value, std_error (NULL where there is none) and known; variances on the model scale, squared",
    ),
    ("shift", "what the level stands above, model scale"),
    (
        "state",
        "filtered state at last_at, model scale: level less shift, slope, then each season (dummy form: the pattern now and one to period - 2 steps ago; harmonics: value and companion of each, the last one at half the period alone), cycle and companion, autoregression now and before, coefficients of drifting drivers, coefficients of constant drivers",
    ),
    ("covariance", "covariance of the state: the rows of its lower triangle, one after another"),
    ("plan", "values of each driver after last_at, constant coefficients first; NULL where there is none"),
    (
        "log_likelihood, converged, evaluations",
        "diffuse log-likelihood of all observations so far; how the estimation ended and what it took",
    ),
];

/// The fields of the layout.
fn fit_fields(time: &DataType) -> Fields {
    Fields::from(vec![
        field("layout_version", DataType::Int32),
        field("status", DataType::Utf8),
        field("refused", DataType::Utf8),
        field("message", DataType::Utf8),
        field("first_at", time.clone()),
        field("last_at", time.clone()),
        field("every", DataType::Utf8),
        field("step_units", DataType::Int64),
        field("step_months", DataType::Int32),
        field("anchor_day", DataType::Int32),
        field("time_of_day", DataType::Int64),
        field("points", DataType::Int64),
        field("n", DataType::Int64),
        field("diffuse", DataType::Int32),
        field("trend", DataType::Utf8),
        field("seasons", list_of(DataType::Struct(season_fields()))),
        field("cycle_shortest", DataType::Float64),
        field("cycle_longest", DataType::Float64),
        field("autoregression", DataType::Int32),
        field("drivers", list_of(DataType::Utf8)),
        field("drifting_drivers", list_of(DataType::Utf8)),
        field("transform", DataType::Utf8),
        field("transform_power", DataType::Float64),
        field("power_estimated", DataType::Boolean),
        field("parameters", list_of(DataType::Struct(parameter_fields()))),
        field("shift", DataType::Float64),
        field("state", list_of(DataType::Float64)),
        field("covariance", list_of(DataType::Float64)),
        field("plan", list_of(list_of(DataType::Float64))),
        field("log_likelihood", DataType::Float64),
        field("converged", DataType::Boolean),
        field("evaluations", DataType::Int64),
    ])
}

#[cfg(test)]
mod tests;
