//! Scalar functions of the calendar: what a planner makes drivers of, from a date.
//!
//! [`function`] is what they have in common as functions of the engine, [`parameters`] what they take, [`call`] how
//! a call reads its arguments row by row. Each other file is one idea: its words, and a few lines that ask the core.
//! The arithmetic is `stillwell_statespace::calendar`.

mod call;
mod dates_in_period;
mod days_in_month;
mod easter_sunday;
mod function;
mod parameters;
#[cfg(test)]
mod tests;
mod weekday_counts;
mod working_days;

use datafusion::logical_expr::ScalarUDF;

use function::{CalendarFunction, Definition};

/// All of them, in the order of the documentation.
pub(crate) fn functions() -> Vec<ScalarUDF> {
    definitions().into_iter().map(|definition| ScalarUDF::from(CalendarFunction::new(definition))).collect()
}

fn definitions() -> [Definition; 6] {
    [
        days_in_month::definition(),
        weekday_counts::definition(),
        working_days::definition(),
        easter_sunday::definition(),
        dates_in_period::count(),
        dates_in_period::indicator(),
    ]
}
