//! The step that `every` states, as a step of the time axis.
//!
//! Dates and timestamps take an interval, integer times take an integer. An interval is either months (with
//! quarters and years) or a fixed span (weeks, days, hours, ...): the two do not mix, because a month has
//! no fixed length. A day is 24 hours here; on a zoned column a step of whole days is a step of the local
//! calendar, and a shorter one a step of elapsed time (see [`super::time_grid`]).

use arrow::datatypes::IntervalMonthDayNano;
use stillwell_statespace::calendar::{Axis, Step};

use super::error::ColumnError;

/// Nanoseconds in a day.
const DAY_NANOS: i128 = 86_400_000_000_000;

/// What a DATE column takes.
const FOR_DATES: &str = "a DATE column takes whole days, weeks, months, quarters or years, such as INTERVAL '7 days' or INTERVAL '1 month'";
/// What a TIMESTAMP column takes.
const FOR_TIMESTAMPS: &str = "a TIMESTAMP column takes months, quarters or years, or else a fixed span in whole units of the column, \
     such as INTERVAL '1 month', INTERVAL '7 days' or INTERVAL '15 minutes'";
/// What an integer column takes.
const FOR_INTEGERS: &str = "an integer time column takes an integer of at least 1, such as every => 1";

/// What the length of a period takes.
const FOR_PERIODS: &str = "a period lasts whole days, weeks, months, quarters or years, such as INTERVAL '7 days' or INTERVAL '1 month'";

/// The step of an interval on a time axis. Other interval types convert to this one without loss.
///
/// # Errors
/// [`ColumnError::WrongStep`]: zero or negative, months mixed with days or hours, not a whole number of the
/// axis' units (hours on dates, microseconds on a column of seconds), too long, or an integer axis.
pub(crate) fn from_interval(axis: Axis, interval: IntervalMonthDayNano) -> Result<Step, ColumnError> {
    let fraction = "is not a whole number of the column's units";
    match axis {
        Axis::Days => whole(interval, DAY_NANOS, fraction, FOR_DATES),
        Axis::Ticks { per_second } | Axis::Instants { per_second } => {
            whole(interval, 1_000_000_000 / i128::from(per_second.max(1)), fraction, FOR_TIMESTAMPS)
        }
        Axis::Integer => Err(wrong(&interval, "has no length in plain numbers", FOR_INTEGERS)),
    }
}

/// The length of a period of whole days or months, wherever its first day comes from.
///
/// # Errors
/// [`ColumnError::WrongStep`]: zero or negative, months mixed with days or hours, or no whole number of days.
pub(crate) fn of_period(interval: IntervalMonthDayNano) -> Result<Step, ColumnError> {
    whole(interval, DAY_NANOS, "is not a whole number of days", FOR_PERIODS)
}

/// The step of an interval in months, or else in units of so many nanoseconds.
fn whole(
    interval: IntervalMonthDayNano,
    unit: i128,
    fraction: &'static str,
    accepted: &'static str,
) -> Result<Step, ColumnError> {
    let IntervalMonthDayNano { months, days, nanoseconds } = interval;
    let span = i128::from(days) * DAY_NANOS + i128::from(nanoseconds);
    if months != 0 && (days != 0 || nanoseconds != 0) {
        return Err(wrong(&interval, "mixes months with days or hours, so it has no even length", accepted));
    }
    if months < 0 || span < 0 || (months == 0 && span == 0) {
        return Err(wrong(&interval, "does not lead forward", accepted));
    }
    if let (true, Ok(months)) = (months > 0, u32::try_from(months)) {
        return Ok(Step::Months(months));
    }
    if span % unit.max(1) != 0 {
        return Err(wrong(&interval, fraction, accepted));
    }
    let too_long = |_| wrong(&interval, "is longer than the column's type can say", accepted);
    i64::try_from(span / unit.max(1)).map(Step::Every).map_err(too_long)
}

/// The step of an integer on a time axis.
///
/// # Errors
/// [`ColumnError::WrongStep`]: below 1, or an axis of dates or timestamps.
pub(crate) fn from_integer(axis: Axis, step: i64) -> Result<Step, ColumnError> {
    let given = step.to_string();
    match axis {
        Axis::Days => {
            Err(ColumnError::WrongStep { given, why: "does not say of what unit", accepted: FOR_DATES })
        }
        Axis::Ticks { .. } | Axis::Instants { .. } => {
            Err(ColumnError::WrongStep { given, why: "does not say of what unit", accepted: FOR_TIMESTAMPS })
        }
        Axis::Integer if step < 1 => {
            Err(ColumnError::WrongStep { given, why: "does not lead forward", accepted: FOR_INTEGERS })
        }
        Axis::Integer => Ok(Step::Every(step)),
    }
}

fn wrong(interval: &IntervalMonthDayNano, why: &'static str, accepted: &'static str) -> ColumnError {
    ColumnError::WrongStep { given: in_words(interval), why, accepted }
}

/// The interval as it could have been written: `INTERVAL '1 months 2 days'`.
fn in_words(interval: &IntervalMonthDayNano) -> String {
    let nanos = interval.nanoseconds;
    let span =
        if nanos % 1_000_000_000 == 0 { (nanos / 1_000_000_000, "seconds") } else { (nanos, "nanoseconds") };
    let parts = [(i64::from(interval.months), "months"), (i64::from(interval.days), "days"), span];
    let said: Vec<String> =
        parts.iter().filter(|(n, _)| *n != 0).map(|(n, unit)| format!("{n} {unit}")).collect();
    format!("INTERVAL '{}'", if said.is_empty() { "0 days".to_owned() } else { said.join(" ") })
}

#[cfg(test)]
mod tests;
