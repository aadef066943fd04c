//! Where the components meet: each appends its states, blocks, parameters and start.

use super::model::{Link, ParameterSpec, Role};
use crate::system::{Op, ProperStart};

/// How a state loads on the observation.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Load {
    None,
    Fixed(f64),
    /// The value of this drifting driver.
    Driver(usize),
}

/// One state.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct StateSpec {
    pub(crate) name: String,
    pub(crate) role: Role,
    pub(crate) load: Load,
    /// The parameter that is the variance of its disturbance.
    pub(crate) variance: Option<usize>,
    pub(crate) diffuse: bool,
}

/// Blocks whose numbers depend on parameters that are not variances. All indices are into the parameters.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Shape {
    DampedSlope { damping: usize, variance: usize },
    Cycle { damping: usize, period: usize, variance: usize },
    Autoregression { first: usize, order: usize, variance: usize },
}

/// A shape and where it stands.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct PlacedShape {
    /// Index of its block.
    pub(crate) block: usize,
    /// First state of its block.
    pub(crate) offset: usize,
    pub(crate) shape: Shape,
}

/// A disturbance that moves several states at once.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct SharedSpec {
    /// The parameter that is its variance; without one the variance is 1.
    pub(crate) parameter: Option<usize>,
    pub(crate) loads: Vec<(usize, f64)>,
}

/// The growing model.
#[derive(Debug, Clone, Default, PartialEq)]
pub(crate) struct Assembly {
    pub(crate) states: Vec<StateSpec>,
    pub(crate) blocks: Vec<Op>,
    pub(crate) shapes: Vec<PlacedShape>,
    /// Disturbances of a system given as matrices.
    pub(crate) shared: Vec<SharedSpec>,
    /// Proper starts that depend on no parameter.
    pub(crate) proper: Vec<ProperStart>,
    pub(crate) parameters: Vec<ParameterSpec>,
}

impl Assembly {
    /// Adds a parameter and returns its index.
    pub(crate) fn parameter(&mut self, name: impl Into<String>, role: Role, link: Link) -> usize {
        self.parameters.push(ParameterSpec { name: name.into(), role, link });
        self.parameters.len() - 1
    }

    /// Adds a block; `states` must be as many as it has rows. Returns the index of the block.
    pub(crate) fn block(&mut self, op: Op, states: impl IntoIterator<Item = StateSpec>) -> usize {
        let before = self.states.len();
        self.states.extend(states);
        debug_assert_eq!(self.states.len() - before, op.len());
        self.blocks.push(op);
        self.blocks.len() - 1
    }

    /// Marks the block just added as one whose numbers come from parameters.
    pub(crate) fn shape(&mut self, block: usize, shape: Shape) {
        let offset = self.blocks[..block].iter().map(Op::len).sum();
        self.shapes.push(PlacedShape { block, offset, shape });
    }
}
