//! `working_days`: Mondays to Fridays of a period, less holidays.

use std::sync::Arc;

use datafusion::arrow::array::{ArrayRef, Int64Array};
use datafusion::arrow::datatypes::DataType;
use datafusion::error::Result;
use stillwell_statespace::calendar::Dates;

use super::call::{Call, Values};
use super::function::Definition;
use super::parameters::{Parameter, Takes};
use super::weekday_counts::{AT, EVERY};

const PARAMETERS: &[Parameter] = &[
    AT,
    EVERY,
    Parameter {
        name: "holidays",
        takes: Takes::Dates,
        description: "Days off: a list of DATE, constant or a column. One that repeats counts once, one on a Saturday \
                      or Sunday takes nothing off, NULLs in the list are passed over; a NULL list gives NULL. Left \
                      out, there are none.",
        optional: true,
    },
];

pub(super) fn definition() -> Definition {
    Definition {
        name: "working_days",
        description: "How many Mondays to Fridays a period has, less the holidays that fall on one.",
        parameters: PARAMETERS,
        result: DataType::Int64,
        example: "SELECT working_days(DATE '2026-12-01', INTERVAL '1 month') AS december,\n       \
                  working_days(at => DATE '2026-12-21', every => INTERVAL '7 days',\n                    \
                  holidays => [DATE '2026-12-25', DATE '2026-12-26']) AS christmas_week",
        related: &["weekday_counts", "dates_in_period", "easter_sunday"],
        work,
    }
}

fn work(call: &Call<'_>) -> Result<ArrayRef> {
    let holidays = if call.has(2) { call.dates(2)? } else { Values::Same(Some(Dates::default())) };
    let periods = call.periods()?;
    let days = |row: usize| Some(periods[row]?.working_days(holidays.at(row)?));
    Ok(Arc::new(call.rows().map(days).collect::<Int64Array>()))
}
