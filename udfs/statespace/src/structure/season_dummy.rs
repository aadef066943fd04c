//! Season in dummy form (H 2.3.4, DK eq. 3.3): `s_{t+1} = -(s_t + ... + s_{t-period+2}) + w_t`, `w_t ~ N(0, season)`.
//!
//! States `[s_t, s_{t-1}, ..., s_{t-period+2}]`, diffuse start, `Z = (1, 0, ..., 0)`. Only the first state is disturbed.

use super::Season;
use super::assembly::{Assembly, Load, StateSpec};
use super::model::{Link, Role};
use crate::system::Op;

pub(super) fn add(assembly: &mut Assembly, season: &Season, name: &str) {
    let len = season.period.round() as usize - 1;
    let variance = (!season.fixed).then(|| assembly.parameter(name, Role::Season, Link::Variance));
    let states = (0..len).map(|i| StateSpec {
        name: format!("{name}_lag_{i}"),
        role: Role::Season,
        load: if i == 0 { Load::Fixed(1.0) } else { Load::None },
        variance: if i == 0 { variance } else { None },
        diffuse: true,
    });
    assembly.block(Op::Season { len }, states);
}
