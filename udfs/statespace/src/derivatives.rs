//! The derivative of the system in each parameter, with the numbers of every lane.

use crate::lanes::Real;
use crate::structure::Effect;

/// [`Effect`] with a number per lane.
#[derive(Debug, Clone, Default)]
pub(crate) struct Derivative<V> {
    /// The parameter is the irregular variance.
    pub(crate) irregular: bool,
    /// States whose disturbance variance it is.
    pub(crate) states: Vec<usize>,
    /// Loads of the shared disturbance whose variance it is.
    pub(crate) loads: Vec<(usize, f64)>,
    /// Derivative of `T`: row, column, value.
    pub(crate) transition: Vec<(usize, usize, V)>,
    /// Derivative of the proper start covariance: row, column, value.
    pub(crate) start: Vec<(usize, usize, V)>,
}

impl<V: Real> Derivative<V> {
    /// Those of a model's parameters, the same in all lanes.
    pub(crate) fn all(effects: &[Effect]) -> Vec<Self> {
        let mut out: Vec<Self> = effects
            .iter()
            .map(|effect| Self {
                irregular: effect.irregular,
                states: effect.states.clone(),
                loads: effect.loads.clone(),
                ..Self::default()
            })
            .collect();
        for lane in 0..V::LANES {
            Self::set_lane(&mut out, lane, effects);
        }
        out
    }

    /// Puts the numbers of effects of the same model into one lane.
    pub(crate) fn set_lane(derivatives: &mut [Self], lane: usize, effects: &[Effect]) {
        for (to, effect) in derivatives.iter_mut().zip(effects) {
            for (to, from) in [(&mut to.transition, &effect.transition), (&mut to.start, &effect.start)] {
                to.resize(from.len(), (0, 0, V::zero()));
                for (to, &(row, column, value)) in to.iter_mut().zip(from) {
                    (to.0, to.1) = (row, column);
                    to.2.set_lane(lane, value);
                }
            }
        }
    }
}
