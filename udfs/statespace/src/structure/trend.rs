//! Trend: level `m_t` and slope `v_t` (H 2.3.1-2.3.2, DK 3.2.1).
//!
//! `m_{t+1} = m_t + v_t + x_t`, `x_t ~ N(0, level)`; `v_{t+1} = damping v_t + z_t`, `z_t ~ N(0, slope)`; `Z = (1, 0)`.
//! The forms fix some of it: a fixed level has no variance and no slope, a fixed line no variances, the
//! smooth trend (integrated random walk) no level variance. The start is diffuse, except that the slope of a
//! damped trend starts from its stationary distribution `N(0, slope / (1 - damping^2))` (H 2.3.2).

use super::assembly::{Assembly, Load, Shape, StateSpec};
use super::model::{Effect, Link, NotStationary, Role};
use super::{MOST_DAMPING, Trend};
use crate::system::{Op, ProperStart};

pub(super) fn add(assembly: &mut Assembly, trend: Trend) {
    if !trend.has_level() {
        return;
    }
    let level_drifts = matches!(trend, Trend::LocalLevel | Trend::LocalLinear | Trend::Damped);
    let slope_drifts = matches!(trend, Trend::LocalLinear | Trend::Smooth | Trend::Damped);
    let level_variance = level_drifts.then(|| assembly.parameter("level", Role::Level, Link::Variance));
    let slope_variance = slope_drifts.then(|| assembly.parameter("slope", Role::Slope, Link::Variance));
    let level = StateSpec {
        name: "level".to_owned(),
        role: Role::Level,
        load: Load::Fixed(1.0),
        variance: level_variance,
        diffuse: true,
    };
    if !trend.has_slope() {
        assembly.block(Op::Keep, [level]);
        return;
    }
    let slope = StateSpec {
        name: "slope".to_owned(),
        role: Role::Slope,
        load: Load::None,
        variance: slope_variance,
        diffuse: trend != Trend::Damped,
    };
    let block = assembly.block(Op::Trend { damping: 1.0 }, [level, slope]);
    if let (Trend::Damped, Some(variance)) = (trend, slope_variance) {
        let damping =
            assembly.parameter("slope_damping", Role::Slope, Link::Between { low: 0.0, high: MOST_DAMPING });
        assembly.shape(block, Shape::DampedSlope { damping, variance });
    }
}

/// Fills block, start and derivatives of a damped slope.
pub(super) fn fill_damped(
    damping: f64,
    variance: f64,
    offset: usize,
    op: &mut Op,
    start: &mut ProperStart,
    of_damping: &mut Effect,
    of_variance: &mut Effect,
) -> Result<(), NotStationary> {
    let spread = 1.0 - damping * damping;
    if !(spread > 0.0) {
        return Err(NotStationary);
    }
    *op = Op::Trend { damping };
    let slope = offset + 1;
    (start.offset, start.size) = (slope, 1);
    start.covariance.clear();
    start.covariance.push(variance / spread);
    of_damping.transition.push((slope, slope, 1.0));
    of_damping.start.push((slope, slope, 2.0 * damping * variance / (spread * spread)));
    of_variance.start.push((slope, slope, 1.0 / spread));
    Ok(())
}
