//! Arrow columns in, series out, and result columns back: no SQL, no sessions.
//!
//! - [`numbers`], [`driver_struct`] and [`time`] read the columns, [`every`] the step of the grid,
//! - [`fit_value`] writes a fit down as a struct of plain types and reads it back,
//! - [`days`] reads times as the dates on the wall clock, for functions of the calendar,
//! - [`groups`] finds where one series ends and the next begins,
//! - [`series`] puts a series on its even grid,
//! - [`result`] says what result tables look like; [`components_rows`], [`forecast_rows`], [`diagnostics_rows`] and
//!   [`state_space_rows`] write theirs.

pub(crate) mod components_rows;
pub(crate) mod days;
pub(crate) mod diagnostics_rows;
pub(crate) mod driver_struct;
mod error;
pub(crate) mod every;
pub(crate) mod fit_value;
pub(crate) mod forecast_rows;
pub(crate) mod groups;
pub(crate) mod numbers;
pub(crate) mod result;
pub(crate) mod series;
pub(crate) mod state_space_rows;
pub(crate) mod time;
pub(crate) mod time_grid;
mod zone;

pub(crate) use error::ColumnError;
