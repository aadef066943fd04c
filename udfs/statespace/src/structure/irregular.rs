//! Irregular: `e_t ~ N(0, h)`, independent over time (DK eq. 3.1). One parameter, `irregular`; no state.
//!
//! It is always parameter 0; a model without it fixes it at zero through `known`.

use super::assembly::Assembly;
use super::model::{Link, Role};

pub(super) fn add(assembly: &mut Assembly) {
    assembly.parameter("irregular", Role::Irregular, Link::Variance);
}
