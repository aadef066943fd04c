//! Time as arithmetic: the even grid that a set of times lies on.
//!
//! A series is modelled on grid points 0, 1, 2, ...; this module says which grid that is
//! ([`Grid::find`], [`Grid::find_with_step`]), which point a time is ([`Grid::index_of`]) and which time
//! a point is ([`Grid::time_at`]). Times are plain integers; an [`Axis`] says what they count, a
//! [`Step`] how far apart two points are. There is no clock, no time zone and no locale in here: whoever
//! reads the times maps zoned ones to one of the two lines, wall clock or instants, beforehand.
//!
//! Beside the grid stands what a driver is made of: a [`Period`] is one step's stretch of days, with its weekdays,
//! its working days and the [`Dates`] of a list that fall in it; [`days_in_month`] and [`easter_sunday`] are what
//! they say.
//!
//! Dates are those of the proleptic Gregorian calendar that ISO 8601 prescribes, year 0 included.

mod axis;
mod civil;
mod dates;
mod easter;
mod find;
mod grid;
mod pattern;
mod period;
mod step;
#[cfg(test)]
mod tests;

pub use axis::Axis;
pub use civil::days_in_month;
pub use dates::Dates;
pub use easter::{EASTER_YEARS, easter_sunday};
pub use find::MAX_POINTS;
pub use grid::Grid;
pub use period::Period;
pub use step::Step;
