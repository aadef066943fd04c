//! `easter_sunday`: the feast that moves the others.

use std::sync::Arc;

use datafusion::arrow::array::Date32Array;
use datafusion::arrow::datatypes::DataType;
use stillwell_statespace::calendar::{EASTER_YEARS, easter_sunday};

use super::function::Definition;
use super::parameters::{Parameter, Takes};

const PARAMETERS: &[Parameter] = &[Parameter {
    name: "year",
    takes: Takes::Year,
    description: "An integer from 1583 to 9999, such as date_part('year', week).",
    optional: false,
}];

pub(super) fn definition() -> Definition {
    Definition {
        name: "easter_sunday",
        description: "Easter Sunday of the western churches in a year, by the Gregorian calendar: between 22 March and \
                      25 April. Good Friday is two days before, Easter Monday one day after, Ascension Day 39 and \
                      Whit Sunday 49 days after.",
        parameters: PARAMETERS,
        result: DataType::Date32,
        example: "SELECT easter_sunday(2026) AS easter, easter_sunday(year => 2027) - INTERVAL '2 days' AS good_friday",
        related: &["has_date_in_period", "working_days"],
        work: |call| {
            let years = call.integers(0)?;
            let sunday = |row| {
                let Some(&year) = years.at(row) else { return Ok(None) };
                let sunday = easter_sunday(year).and_then(|day| i32::try_from(day).ok());
                sunday.map(Some).ok_or_else(|| call.wrong(0, &outside(year)))
            };
            Ok(Arc::new(call.rows().map(sunday).collect::<Result<Date32Array, _>>()?))
        },
    }
}

fn outside(year: i64) -> String {
    let (first, last) = (EASTER_YEARS.start(), EASTER_YEARS.end());
    format!(
        "is {year}, outside the years {first} to {last}: the Gregorian Easter begins in {first}; leave such rows out"
    )
}
