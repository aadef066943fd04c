//! A structure's model: its states and parameters, and the system at given parameter values together with
//! the derivative of the system in each parameter.

use super::assembly::{Assembly, Load, Shape, StateSpec};
use super::{autoregression, cycle, trend};
use crate::system::{Op, ProperStart, SharedNoise, System};

/// Which component a state or parameter belongs to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Role {
    /// The white irregular.
    Irregular,
    /// Level of the trend.
    Level,
    /// Slope of the trend.
    Slope,
    /// A seasonal pattern.
    Season,
    /// The stochastic cycle.
    Cycle,
    /// The autoregression.
    Autoregression,
    /// The coefficient of this drifting driver.
    Driver(usize),
    /// A state or disturbance of a system given as matrices.
    General,
}

/// How a parameter is bounded; estimation works on the unbounded side.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Link {
    /// A variance: not negative, may be exactly zero; logarithm inside.
    Variance,
    /// Between two bounds, both allowed; logit inside.
    Between {
        /// Lower bound.
        low: f64,
        /// Upper bound.
        high: f64,
    },
    /// Any number for which the system is stationary.
    Free,
}

/// One parameter of a model.
#[derive(Debug, Clone, PartialEq)]
pub struct ParameterSpec {
    /// Name, as in the `known` argument.
    pub name: String,
    /// Component.
    pub role: Role,
    /// Bounds.
    pub link: Link,
}

/// The parameters leave the stationary region: there is no proper start.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct NotStationary;

/// Derivative of the system in one parameter. A variance has derivative 1 in its places.
#[derive(Debug, Clone, Default, PartialEq)]
pub(crate) struct Effect {
    /// The parameter is the irregular variance.
    pub(crate) irregular: bool,
    /// States whose disturbance variance it is.
    pub(crate) states: Vec<usize>,
    /// Loads of the shared disturbance whose variance it is.
    pub(crate) loads: Vec<(usize, f64)>,
    /// Derivative of `T`: row, column, value.
    pub(crate) transition: Vec<(usize, usize, f64)>,
    /// Derivative of the proper start covariance: row, column, value.
    pub(crate) start: Vec<(usize, usize, f64)>,
}

/// A structure, ready to take parameter values.
#[derive(Debug, Clone)]
pub struct Model {
    pub(crate) assembly: Assembly,
    pub(crate) drivers: usize,
    pub(crate) effects: Vec<Effect>,
}

impl Model {
    pub(crate) fn new(assembly: Assembly, drivers: usize) -> Self {
        let effects = (0..assembly.parameters.len())
            .map(|i| Effect {
                irregular: assembly.parameters[i].role == Role::Irregular,
                states: (0..assembly.states.len())
                    .filter(|&s| assembly.states[s].variance == Some(i))
                    .collect(),
                loads: assembly
                    .shared
                    .iter()
                    .find(|noise| noise.parameter == Some(i))
                    .map_or_else(Vec::new, |noise| noise.loads.clone()),
                ..Effect::default()
            })
            .collect();
        Self { assembly, drivers, effects }
    }

    /// The parameters in order.
    pub fn parameters(&self) -> &[ParameterSpec] {
        &self.assembly.parameters
    }

    /// Number of states m.
    pub fn states(&self) -> usize {
        self.assembly.states.len()
    }

    /// Names of the states in order.
    pub fn state_names(&self) -> impl Iterator<Item = &str> {
        self.assembly.states.iter().map(|s| s.name.as_str())
    }

    pub(crate) fn state_specs(&self) -> &[StateSpec] {
        &self.assembly.states
    }

    /// The state whose shifts are looked for.
    pub(crate) fn level(&self) -> Option<usize> {
        self.assembly.states.iter().position(|s| s.role == Role::Level)
    }

    /// Diffuse elements d: non-stationary states and constant driver coefficients.
    pub fn diffuse_elements(&self) -> usize {
        self.assembly.states.iter().filter(|s| s.diffuse).count() + self.drivers
    }

    /// The variance of the component that parameter `i` damps; `None` where it is not a damping.
    pub(crate) fn variance_of_damping(&self, i: usize) -> Option<usize> {
        self.assembly.shapes.iter().find_map(|placed| match placed.shape {
            Shape::DampedSlope { damping, variance } | Shape::Cycle { damping, variance, .. } => {
                (damping == i).then_some(variance)
            }
            Shape::Autoregression { .. } => None,
        })
    }

    /// A system of this model with all that does not depend on parameters filled in.
    pub fn system(&self) -> System {
        let states = &self.assembly.states;
        let mut system = System {
            states: states.len(),
            transition: self.assembly.blocks.clone(),
            q: vec![0.0; states.len()],
            shared: self
                .assembly
                .shared
                .iter()
                .map(|noise| SharedNoise { loads: noise.loads.clone(), variance: 1.0 })
                .collect(),
            proper: self.assembly.proper.clone(),
            ..System::default()
        };
        for (i, state) in states.iter().enumerate() {
            match state.load {
                Load::None => {}
                Load::Fixed(value) => system.fixed_loads.push((i, value)),
                Load::Driver(driver) => system.driver_loads.push((i, driver)),
            }
            if state.diffuse {
                system.diffuse.push(i);
            }
        }
        for placed in &self.assembly.shapes {
            let size = match placed.shape {
                Shape::DampedSlope { .. } => 1,
                Shape::Cycle { .. } => 2,
                Shape::Autoregression { order, .. } => order,
            };
            system.proper.push(ProperStart {
                offset: placed.offset,
                size,
                covariance: vec![0.0; size * size],
            });
        }
        system
    }

    /// The system at parameter values (natural units, order of [`Self::parameters`]).
    ///
    /// # Errors
    /// When the values leave the stationary region.
    pub fn system_at(&self, values: &[f64]) -> Result<System, crate::EvaluationError> {
        let (mut model, mut system) = (self.clone(), self.system());
        model.fill(values, &mut system).map_err(|_| crate::EvaluationError::NotStationary)?;
        Ok(system)
    }

    /// Puts parameter values (natural units, order of [`Self::parameters`]) into `system`, and the derivatives
    /// of the shapes into this model's effects.
    pub(crate) fn fill(&mut self, values: &[f64], system: &mut System) -> Result<(), NotStationary> {
        debug_assert_eq!(values.len(), self.assembly.parameters.len());
        system.h = values[0];
        for (q, state) in system.q.iter_mut().zip(&self.assembly.states) {
            *q = state.variance.map_or(0.0, |i| values[i]);
        }
        for (shared, noise) in system.shared.iter_mut().zip(&self.assembly.shared) {
            if let Some(parameter) = noise.parameter {
                shared.variance = values[parameter];
            }
        }
        for effect in &mut self.effects {
            effect.transition.clear();
            effect.start.clear();
        }
        for (index, placed) in self.assembly.shapes.iter().enumerate() {
            let op: &mut Op = &mut system.transition[placed.block];
            let start = &mut system.proper[index];
            let effects = &mut self.effects;
            match placed.shape {
                Shape::DampedSlope { damping, variance } => {
                    let [of_damping, of_variance] = pair(effects, damping, variance);
                    let (d, v) = (values[damping], values[variance]);
                    trend::fill_damped(d, v, placed.offset, op, start, of_damping, of_variance)?;
                }
                Shape::Cycle { damping, period, variance } => {
                    let values = cycle::CycleValues {
                        damping: values[damping],
                        period: values[period],
                        variance: values[variance],
                    };
                    // The cycle's parameters stand together: variance, damping, period.
                    let [of_variance, of_damping, of_period] = &mut effects[variance..=period] else {
                        return Err(NotStationary);
                    };
                    cycle::fill(values, placed.offset, op, start, [of_damping, of_period, of_variance])?;
                }
                Shape::Autoregression { first, order, variance } => {
                    let coefficients = &values[first..first + order];
                    let at = (first, variance);
                    autoregression::fill(
                        coefficients,
                        values[variance],
                        placed.offset,
                        op,
                        start,
                        effects,
                        at,
                    )?;
                }
            }
        }
        Ok(())
    }
}

/// Two different elements of a slice at once.
fn pair(effects: &mut [Effect], a: usize, b: usize) -> [&mut Effect; 2] {
    if a < b {
        let (left, right) = effects.split_at_mut(b);
        [&mut left[a], &mut right[0]]
    } else {
        let (left, right) = effects.split_at_mut(a);
        [&mut right[0], &mut left[b]]
    }
}
