//! Season as a sum of harmonics (H 2.3.4, DK eqs. 3.7-3.8): harmonic j turns by `2 pi j / period` each step,
//! `[c s; -s c]`, both states disturbed with the one variance `season`; `Z = (1, 0)` per harmonic; diffuse start.
//!
//! The harmonic at half a whole period has a single state that alternates. With all harmonics of a whole
//! period and no drift this is the dummy form in another basis; with drift it is a different model.

use super::Season;
use super::assembly::{Assembly, Load, StateSpec};
use super::model::{Link, Role};
use crate::system::Op;

pub(super) fn add(assembly: &mut Assembly, season: &Season, count: usize, name: &str) {
    let variance = (!season.fixed).then(|| assembly.parameter(name, Role::Season, Link::Variance));
    let state = |j: usize, part: &str, load: Load| StateSpec {
        name: format!("{name}_harmonic_{j}{part}"),
        role: Role::Season,
        load,
        variance,
        diffuse: true,
    };
    for j in 1..=count {
        let twice = 2.0 * j as f64;
        if twice == season.period {
            assembly.block(Op::Negate, [state(j, "", Load::Fixed(1.0))]);
        } else {
            let frequency = std::f64::consts::PI * twice / season.period;
            let op = Op::Rotate { cos: frequency.cos(), sin: frequency.sin() };
            assembly.block(op, [state(j, "", Load::Fixed(1.0)), state(j, "_companion", Load::None)]);
        }
    }
}
