//! Columns of dates and timestamps as day numbers: the date that the wall clock shows.
//!
//! A day number is days since 1970-01-01. A timestamp without a zone is the wall clock already; one with a zone is
//! read on the clock of that zone, so that midnight in Auckland is the new day there and not yet in London.

use arrow::array::ArrayRef;
use arrow::datatypes::DataType;
use stillwell_statespace::calendar::Axis;

use super::error::ColumnError;
use super::time::TimeKind;

/// Whether a column of this type holds dates, or times of known dates.
///
/// # Errors
/// [`ColumnError::UnknownZone`] for a timestamp of a zone that nobody knows.
pub(crate) fn has_dates(data_type: &DataType) -> Result<bool, ColumnError> {
    match data_type {
        DataType::Date32 | DataType::Date64 | DataType::Timestamp(..) => {
            TimeKind::try_new(data_type).map(|_| true)
        }
        _ => Ok(false),
    }
}

/// The day number of each row, `None` for NULL.
///
/// # Errors
/// [`ColumnError::NotATime`] or [`ColumnError::UnknownZone`] for types without dates, integers among them;
/// [`ColumnError::NoWallClock`] for a zoned timestamp hundreds of thousands of years away.
pub(crate) fn read(column: &ArrayRef) -> Result<Vec<Option<i64>>, ColumnError> {
    let kind = TimeKind::try_new(column.data_type())?;
    let per_second = match kind.axis() {
        Axis::Days => return kind.read(column),
        Axis::Ticks { per_second } | Axis::Instants { per_second } => per_second,
        Axis::Integer => return Err(ColumnError::NotATime { found: column.data_type().clone() }),
    };
    let per_day = per_second * 86_400;
    let stored = kind.read(column)?;
    let Some(zone) = kind.zone() else {
        return Ok(stored.into_iter().map(|ticks| Some(ticks?.div_euclid(per_day))).collect());
    };
    let local = |instant: i64| {
        let ticks = zone.local(instant, per_second).ok_or_else(|| ColumnError::NoWallClock {
            instant: Axis::Instants { per_second }.format(instant),
        })?;
        Ok(ticks.div_euclid(per_day))
    };
    stored.into_iter().map(|instant| instant.map(local).transpose()).collect()
}

#[cfg(test)]
mod tests;
