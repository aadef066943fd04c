//! What a search knows about the parameters of its model.

use crate::structure::{Link, Model, Role};

/// The parameters in order: their bounds, and which of them are to be estimated.
#[derive(Debug, Clone)]
pub(super) struct Layout {
    pub(super) links: Vec<Link>,
    pub(super) free: Vec<bool>,
    /// What a damping's variance is scaled with when the damping moves: index of the variance.
    pub(super) spread_of: Vec<Option<usize>>,
    /// The free variance of the level beside a slope with this damping.
    pub(super) level_of: Vec<Option<usize>>,
    /// The covariance of the data is the variances times what does not depend on them.
    pub(super) linear: bool,
    /// Besides, no known variance fixes the scale.
    pub(super) scaled: bool,
}

impl Layout {
    pub(super) fn new(model: &Model, known: &[Option<f64>]) -> Self {
        let links: Vec<Link> = model.parameters().iter().map(|spec| spec.link).collect();
        let assembly = &model.assembly;
        let linear =
            assembly.proper.is_empty() && assembly.shared.iter().all(|noise| noise.parameter.is_some());
        let fixed =
            |(link, known): (&Link, &Option<f64>)| *link == Link::Variance && known.is_some_and(|v| v != 0.0);
        let level =
            (0..known.len()).find(|&i| model.parameters()[i].role == Role::Level && known[i].is_none());
        Self {
            scaled: linear && !links.iter().zip(known).any(fixed),
            links,
            free: known.iter().map(Option::is_none).collect(),
            level_of: model
                .parameters()
                .iter()
                .map(|spec| {
                    (spec.role == Role::Slope && spec.link != Link::Variance).then_some(level).flatten()
                })
                .collect(),
            spread_of: (0..known.len()).map(|i| model.variance_of_damping(i)).collect(),
            linear,
        }
    }

    pub(super) fn is_variance(&self, i: usize) -> bool {
        self.links[i] == Link::Variance
    }
}

/// d value / d unbounded.
pub(super) fn derivative(link: Link, value: f64) -> f64 {
    match link {
        Link::Variance => value,
        Link::Between { low, high } => (value - low) * (high - value) / (high - low),
        Link::Free => 1.0,
    }
}

/// The value after a step on the unbounded side.
pub(super) fn moved(link: Link, value: f64, step: f64) -> f64 {
    match link {
        Link::Variance => value * step.exp(),
        Link::Between { low, high } => {
            let odds = (value - low) / (high - value) * step.exp();
            let moved = low + (high - low) * odds / (1.0 + odds);
            // Rounding must not land on a bound.
            let margin = 1e-9 * (high - low);
            moved.clamp(low + margin, high - margin)
        }
        Link::Free => value + step,
    }
}
