//! Whether a series can lie on a line with a fixed seasonal pattern, before a filter is asked.

use crate::estimate::EXACT;
use crate::request::Series;
use crate::structure::Structure;

/// False when a line and fixed patterns cannot reproduce the series to rounding, told by its differences: a pattern of a whole period `s` and a
/// line leave nothing in `(y_t - y_{t-s}) - (y_{t-1} - y_{t-s-1})`. True where that says nothing. `rounding`: size of an error
/// of the data's own last digits.
pub(super) fn may_be_exact(structure: &Structure, series: &Series, rounding: f64) -> bool {
    let alone = structure.cycle.is_none()
        && structure.autoregression == 0
        && series.drivers.is_empty()
        && series.drifting_drivers.is_empty();
    let period = match structure.seasons.as_slice() {
        [] => 1,
        [season] if season.period.fract() == 0.0 => season.period as usize,
        _ => return true,
    };
    let y = &series.observed;
    if !alone {
        return true;
    }
    // Each residual of an exact fit is at most the root of the sum of their squares.
    let limit = 8.0 * (y.len() as f64).sqrt() * EXACT.sqrt().max(rounding);
    (period + 1..y.len()).all(|t| {
        let left = (y[t] - y[t - period]) - (y[t - 1] - y[t - 1 - period]);
        left.is_nan() || left.abs() <= limit
    })
}
