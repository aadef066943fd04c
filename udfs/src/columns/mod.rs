//! Arrow columns in, series out, and result columns back: no SQL, no sessions.
//!
//! - [`numbers`] and [`time`] read the columns, [`every`] the step of the grid,
//! - [`days`] reads times as the dates on the wall clock, for functions of the calendar,
//! - [`groups`] finds where one series ends and the next begins,
//! - [`series`] puts a series on its even grid,
//! - [`result`] says what result tables look like; [`components_rows`], [`forecast_rows`] and
//!   [`diagnostics_rows`] write theirs.

pub(crate) mod components_rows;
pub(crate) mod days;
pub(crate) mod diagnostics_rows;
mod error;
pub(crate) mod every;
pub(crate) mod forecast_rows;
pub(crate) mod groups;
pub(crate) mod numbers;
pub(crate) mod result;
pub(crate) mod series;
pub(crate) mod time;
mod time_grid;
mod zone;

pub(crate) use error::ColumnError;
