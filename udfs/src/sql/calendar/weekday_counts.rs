//! `weekday_counts`: how often each weekday falls in a period.

use std::sync::Arc;

use datafusion::arrow::array::{ArrayRef, Int64Array, StructArray};
use datafusion::arrow::datatypes::{DataType, Field, Fields};
use datafusion::error::Result;

use super::call::Call;
use super::function::Definition;
use super::parameters::{Parameter, Takes};

/// The fields of the result.
const WEEKDAYS: [&str; 7] = ["monday", "tuesday", "wednesday", "thursday", "friday", "saturday", "sunday"];

/// The start of a period.
pub(super) const AT: Parameter = Parameter {
    name: "at",
    takes: Takes::Time,
    description: "First day of the period: DATE, or TIMESTAMP by the date on its wall clock.",
    optional: false,
};

/// The length of a period.
pub(super) const EVERY: Parameter = Parameter {
    name: "every",
    takes: Takes::Every,
    description: "Length of the period: an INTERVAL of whole months or whole days, such as INTERVAL '1 month' or \
                  INTERVAL '7 days'.",
    optional: false,
};

const PARAMETERS: &[Parameter] = &[AT, EVERY];

pub(super) fn definition() -> Definition {
    Definition {
        name: "weekday_counts",
        description: "How often each weekday falls in a period, as a struct of `monday` to `sunday`. The trade's \
                      trading-day regressors are made of these counts, as contrasts with one weekday: the six \
                      drivers monday - sunday, tuesday - sunday, ..., saturday - sunday say what each weekday is \
                      worth beyond an average day. The counts themselves, all seven, add up to the length of the \
                      period, which is another driver.",
        parameters: PARAMETERS,
        result: DataType::Struct(fields()),
        example: "SELECT month, counts['monday'] AS mondays, counts['sunday'] AS sundays,\n       \
                  counts['monday'] - counts['sunday'] AS monday_contrast\n\
                  FROM (SELECT month, weekday_counts(month, INTERVAL '1 month') AS counts\n      \
                  FROM (VALUES (DATE '2026-02-01'), (DATE '2026-05-01'), (DATE '2026-06-01')) AS months(month))\n\
                  ORDER BY month",
        related: &["working_days", "days_in_month"],
        work,
    }
}

/// A field is NULL where the struct is, because the engine reads a field without looking at its struct.
fn fields() -> Fields {
    WEEKDAYS.iter().map(|name| Field::new(*name, DataType::Int64, true)).collect()
}

fn work(call: &Call<'_>) -> Result<ArrayRef> {
    let counts: Vec<Option<[i64; 7]>> =
        call.periods()?.into_iter().map(|period| Some(period?.weekday_counts())).collect();
    let column = |weekday: usize| -> ArrayRef {
        Arc::new(counts.iter().map(|counts| counts.map(|counts| counts[weekday])).collect::<Int64Array>())
    };
    let valid = counts.iter().map(Option::is_some).collect();
    Ok(Arc::new(StructArray::try_new(fields(), (0..WEEKDAYS.len()).map(column).collect(), Some(valid))?))
}
