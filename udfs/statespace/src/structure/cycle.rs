//! Stochastic damped cycle (H 2.3.3, DK eq. 3.13): `[c_{t+1}; c*_{t+1}] = damping [cos sin; -sin cos] [c_t; c*_t] + k_t`
//! with frequency `2 pi / period` and both elements of `k_t ~ N(0, cycle)`; `Z = (1, 0)`.
//!
//! Stationary start: both states `N(0, cycle / (1 - damping^2))`, uncorrelated. Parameters `cycle`, `cycle_damping` in
//! (0, 1), `cycle_period` between the bounds asked for.

use super::assembly::{Assembly, Load, Shape, StateSpec};
use super::model::{Effect, Link, NotStationary, Role};
use super::{Cycle, MOST_DAMPING};
use crate::system::{Op, ProperStart};

pub(super) fn add(assembly: &mut Assembly, bounds: Cycle) {
    let variance = assembly.parameter("cycle", Role::Cycle, Link::Variance);
    let damping =
        assembly.parameter("cycle_damping", Role::Cycle, Link::Between { low: 0.0, high: MOST_DAMPING });
    let period = assembly.parameter(
        "cycle_period",
        Role::Cycle,
        Link::Between { low: bounds.shortest, high: bounds.longest },
    );
    let state = |name: &str, load| StateSpec {
        name: name.to_owned(),
        role: Role::Cycle,
        load,
        variance: Some(variance),
        diffuse: false,
    };
    let states = [state("cycle", Load::Fixed(1.0)), state("cycle_companion", Load::None)];
    let block = assembly.block(Op::Rotate { cos: 1.0, sin: 0.0 }, states);
    assembly.shape(block, Shape::Cycle { damping, period, variance });
}

/// Values of the parameters of a cycle.
#[derive(Debug, Clone, Copy)]
pub(super) struct CycleValues {
    pub(super) damping: f64,
    pub(super) period: f64,
    pub(super) variance: f64,
}

/// Fills block, start and derivatives; `effects` are those of damping, period and variance.
pub(super) fn fill(
    values: CycleValues,
    offset: usize,
    op: &mut Op,
    start: &mut ProperStart,
    effects: [&mut Effect; 3],
) -> Result<(), NotStationary> {
    let CycleValues { damping, period, variance } = values;
    let spread = 1.0 - damping * damping;
    if !(spread > 0.0) {
        return Err(NotStationary);
    }
    let frequency = std::f64::consts::TAU / period;
    let (sin, cos) = frequency.sin_cos();
    *op = Op::Rotate { cos: damping * cos, sin: damping * sin };
    (start.offset, start.size) = (offset, 2);
    start.covariance.clear();
    start.covariance.extend([variance / spread, 0.0, 0.0, variance / spread]);
    let [of_damping, of_period, of_variance] = effects;
    let (a, b) = (offset, offset + 1);
    of_damping.transition.extend([(a, a, cos), (a, b, sin), (b, a, -sin), (b, b, cos)]);
    let turn = -damping * frequency / period;
    of_period.transition.extend([
        (a, a, -turn * sin),
        (a, b, turn * cos),
        (b, a, -turn * cos),
        (b, b, -turn * sin),
    ]);
    for state in [a, b] {
        of_damping.start.push((state, state, 2.0 * damping * variance / (spread * spread)));
        of_variance.start.push((state, state, 1.0 / spread));
    }
    Ok(())
}
