//! Drivers (regressors). A constant coefficient is a diffuse element without a state: its column of the
//! augmented filter starts at zero and takes `-x_t` with each row (DK 6.2.3 in the form of de Jong 1991). A drifting coefficient is a
//! state: `b_{t+1} = b_t + u_t`, `u_t ~ N(0, <driver>)`, `Z_t = x_t`, diffuse start (DK 3.6.1, H 7.1).

use super::assembly::{Assembly, Load, StateSpec};
use super::model::{Link, Role};
use crate::system::Op;

pub(super) fn add(assembly: &mut Assembly, drifting: &[String]) {
    for (index, name) in drifting.iter().enumerate() {
        let variance = assembly.parameter(name.clone(), Role::Driver(index), Link::Variance);
        let state = StateSpec {
            name: format!("coefficient_of_{name}"),
            role: Role::Driver(index),
            load: Load::Driver(index),
            variance: Some(variance),
            diffuse: true,
        };
        assembly.block(Op::Keep, [state]);
    }
}
