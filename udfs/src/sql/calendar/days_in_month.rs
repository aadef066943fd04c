//! `days_in_month`: the length of a month.

use std::sync::Arc;

use datafusion::arrow::array::Int64Array;
use datafusion::arrow::datatypes::DataType;
use stillwell_statespace::calendar::days_in_month;

use super::function::Definition;
use super::parameters::{Parameter, Takes};

const PARAMETERS: &[Parameter] = &[Parameter {
    name: "at",
    takes: Takes::Time,
    description: "A day of the month: DATE, or TIMESTAMP by the date on its wall clock.",
    optional: false,
}];

pub(super) fn definition() -> Definition {
    Definition {
        name: "days_in_month",
        description: "How many days the month of a date has, 28 to 31. Monthly totals of something that goes on every \
                      day rise and fall with it: on the log scale take ln(days_in_month(month)) as the driver.",
        parameters: PARAMETERS,
        result: DataType::Int64,
        example: "SELECT days_in_month(DATE '2024-02-10') AS leap_year,\n       \
                  days_in_month(at => DATE '2025-02-10') AS common_year",
        related: &["weekday_counts", "working_days"],
        work: |call| {
            let at = call.days(0)?;
            let days = |row| at.at(row).map(|&day| i64::from(days_in_month(day)));
            Ok(Arc::new(call.rows().map(days).collect::<Int64Array>()))
        },
    }
}
