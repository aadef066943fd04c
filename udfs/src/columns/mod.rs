//! Arrow columns in, series out, and result columns back: no SQL, no sessions.
//!
//! - [`numbers`], [`driver_struct`] and [`time`] read the columns, [`every`] the step of the grid,
//! - [`groups`] finds where one series ends and the next begins,
//! - [`series`] puts a series on its even grid,
//! - [`result`] says what result tables look like; [`components_rows`], [`forecast_rows`] and
//!   [`diagnostics_rows`] write theirs.

pub(crate) mod components_rows;
pub(crate) mod diagnostics_rows;
pub(crate) mod driver_struct;
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
