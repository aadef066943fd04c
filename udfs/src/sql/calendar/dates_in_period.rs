//! `dates_in_period` and `has_date_in_period`: the days of a list that fall in a period.

use std::sync::Arc;

use datafusion::arrow::array::{BooleanArray, Int64Array};
use datafusion::arrow::datatypes::DataType;
use datafusion::error::Result;

use super::call::Call;
use super::function::Definition;
use super::parameters::{Parameter, Takes};
use super::weekday_counts::{AT, EVERY};

const PARAMETERS: &[Parameter] = &[
    AT,
    EVERY,
    Parameter {
        name: "dates",
        takes: Takes::Dates,
        description: "The days to look for: a list of DATE, constant or a column. One that repeats counts once, NULLs \
                      in the list are passed over; a NULL list gives NULL.",
        optional: false,
    },
];

pub(super) fn count() -> Definition {
    Definition {
        name: "dates_in_period",
        description: "How many different days of a list fall in a period.",
        parameters: PARAMETERS,
        result: DataType::Int64,
        example: "SELECT dates_in_period(DATE '2026-12-21', INTERVAL '14 days',\n                       \
                  [DATE '2026-12-25', DATE '2026-12-26', DATE '2027-01-01', DATE '2027-01-06']) AS holidays",
        related: &["has_date_in_period", "working_days"],
        work: |call| {
            let found = found(call)?;
            Ok(Arc::new(found.into_iter().map(|n| n.map(|n| n as i64)).collect::<Int64Array>()))
        },
    }
}

pub(super) fn indicator() -> Definition {
    Definition {
        name: "has_date_in_period",
        description: "Whether any day of a list falls in a period: the indicator of a holiday, a fair, a tax day. A \
                      driver may be BOOLEAN as it is.",
        parameters: PARAMETERS,
        result: DataType::Boolean,
        example: "SELECT week, has_date_in_period(week, INTERVAL '7 days', [easter_sunday(2026)]) AS easter\n\
                  FROM (VALUES (DATE '2026-03-23'), (DATE '2026-03-30'), (DATE '2026-04-06')) AS weeks(week)\n\
                  ORDER BY week",
        related: &["dates_in_period", "easter_sunday"],
        work: |call| {
            let found = found(call)?;
            Ok(Arc::new(found.into_iter().map(|n| n.map(|n| n > 0)).collect::<BooleanArray>()))
        },
    }
}

/// How many days of the list fall in the period of each row.
fn found(call: &Call<'_>) -> Result<Vec<Option<usize>>> {
    let dates = call.dates(2)?;
    let periods = call.periods()?;
    Ok(call.rows().map(|row| Some(dates.at(row)?.within(periods[row]?).len())).collect())
}
