//! Tests of the calendar. Dates are those of ISO 8601 (proleptic Gregorian calendar).

mod civil;
mod easter;
mod finding;
mod periods;
mod properties;
mod stepping;

use super::civil::Civil;
use super::{Axis, Dates, EASTER_YEARS, Grid, Period, Step, days_in_month, easter_sunday};
use crate::Trouble;

/// Seconds since 1970-01-01T00:00:00.
const SECONDS: Axis = Axis::Ticks { per_second: 1 };
/// Seconds in a day.
const DAY: i64 = 86_400;

/// The day number of a date.
fn day(year: i64, month: u32, day: u32) -> i64 {
    Civil { year, month, day }.to_days().unwrap()
}

/// The day numbers of dates written as (year, month, day).
fn days(dates: &[(i64, u32, u32)]) -> Vec<i64> {
    dates.iter().map(|&(y, m, d)| day(y, m, d)).collect()
}

/// The points of a grid at these indices.
fn points(grid: &Grid, indices: impl IntoIterator<Item = usize>) -> Vec<i64> {
    indices.into_iter().map(|i| grid.time_at(i).unwrap()).collect()
}

/// What `OffGrid` says: the time and the grid.
fn off_grid(found: Result<Grid, Trouble>) -> (String, String) {
    match found {
        Err(Trouble::OffGrid { at, grid }) => (at, grid),
        other => panic!("expected a time off the grid, got {other:?}"),
    }
}

/// What `NoGrid` says.
fn no_grid(found: Result<Grid, Trouble>) -> String {
    match found {
        Err(Trouble::NoGrid { why }) => why,
        other => panic!("expected no grid, got {other:?}"),
    }
}
