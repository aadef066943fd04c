//! Time columns of every type as `i64`, and back.
//!
//! A time is carried as the integer that its column stores (days, ticks since 1970, or the number itself):
//! sorting, comparing and rebuilding a column of the original type then cost nothing and lose nothing. What
//! such an integer means on a grid, time zones included, is [`TimeGrid`]'s business.

use arrow::array::{Array, ArrayRef, AsArray, Int64Array};
use arrow::compute::{CastOptions, cast, cast_with_options};
use arrow::datatypes::{DataType, Int64Type, TimeUnit};
use arrow::error::ArrowError;
use stillwell_statespace::Trouble;
use stillwell_statespace::calendar::{Axis, Step};

use super::error::ColumnError;
use super::time_grid::TimeGrid;
use super::zone::Zone;

/// A type of time column: DATE, TIMESTAMP or integer.
#[derive(Debug, Clone)]
pub(crate) struct TimeKind {
    data_type: DataType,
    axis: Axis,
    /// Only of timestamps that have one.
    zone: Option<Zone>,
}

impl TimeKind {
    /// # Errors
    /// [`ColumnError::NotATime`] for other types, [`ColumnError::UnknownZone`] for zones nobody knows.
    pub(crate) fn try_new(data_type: &DataType) -> Result<Self, ColumnError> {
        let mut zone = None;
        let axis = match data_type {
            DataType::Date32 => Axis::Days,
            // Stored in milliseconds. The format asks for whole days; whatever else is in there is kept.
            DataType::Date64 => Axis::Ticks { per_second: 1_000 },
            DataType::Timestamp(unit, name) => {
                zone = name.as_deref().map(Zone::try_new).transpose()?;
                Axis::Ticks { per_second: per_second(*unit) }
            }
            integer if integer.is_integer() => Axis::Integer,
            other => return Err(ColumnError::NotATime { found: other.clone() }),
        };
        Ok(Self { data_type: data_type.clone(), axis, zone })
    }

    /// The type of the column.
    pub(crate) fn data_type(&self) -> &DataType {
        &self.data_type
    }

    /// What the stored integers count; `every` is read on this axis.
    pub(crate) fn axis(&self) -> Axis {
        self.axis
    }

    /// The zone, if the column has one.
    pub(super) fn zone(&self) -> Option<Zone> {
        self.zone
    }

    /// The stored integer of each row, `None` for NULL. `column` has this type.
    ///
    /// # Errors
    /// [`ColumnError::BeyondRange`] for unsigned integers above 2^63 - 1, [`ColumnError::NotATime`] for a
    /// column of a type that is no time.
    pub(crate) fn read(&self, column: &ArrayRef) -> Result<Vec<Option<i64>>, ColumnError> {
        if column.data_type() != &self.data_type {
            return Err(ColumnError::NotATime { found: column.data_type().clone() });
        }
        let strict = CastOptions { safe: false, ..CastOptions::default() };
        let stored = cast_with_options(column, &DataType::Int64, &strict)
            .map_err(|error| ColumnError::BeyondRange { what: error.to_string() })?;
        Ok(stored.as_primitive::<Int64Type>().iter().collect())
    }

    /// A column of this type from stored integers. One that the type cannot hold (a forecast for year 128 in
    /// an 8-bit column) becomes NULL.
    ///
    /// # Errors
    /// None that a value could cause; arrow's own signature.
    pub(crate) fn array(&self, stored: &[Option<i64>]) -> Result<ArrayRef, ArrowError> {
        cast(&Int64Array::from_iter(stored.iter().copied()), &self.data_type)
    }

    /// The grid of one series from its stored times: found, or of the step that `every` states.
    /// `stored` ascends; a repeated time is trouble.
    ///
    /// # Errors
    /// [`Trouble::NoGrid`], [`Trouble::OffGrid`], [`Trouble::DuplicateTime`], each with the time it is about.
    pub(crate) fn grid(&self, stored: &[i64], every: Option<Step>) -> Result<TimeGrid, Trouble> {
        TimeGrid::try_new(self, stored, every)
    }
}

/// Ticks in a second.
fn per_second(unit: TimeUnit) -> i64 {
    match unit {
        TimeUnit::Second => 1,
        TimeUnit::Millisecond => 1_000,
        TimeUnit::Microsecond => 1_000_000,
        TimeUnit::Nanosecond => 1_000_000_000,
    }
}

#[cfg(test)]
mod tests;
