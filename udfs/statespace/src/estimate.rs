//! Maximum likelihood by trust-region scoring with the average information.
//!
//! The step solves `(H + lambda D) x = g` (Levenberg 1944; Marquardt 1963; Moré 1978, *Numerical Analysis*, LNM 630) with the
//! exact score `g` and the average information `H`, both taken to the unbounded side of each parameter (log variances,
//! logits). No optimiser crate offers scoring with a caller's own curvature and bounds that are part of the answer, which is why
//! this one is here.
//!
//! **Limits.** A variance whose best value is zero would make its logarithm creep for ever, and so would a damping or a period whose
//! best value is the end of its range. As soon as one is near its limit and still on the way, the limit itself is tried: where the
//! likelihood is not lower there, the parameter is held there, exactly, and leaves the free set. It comes back if the score later
//! points inward. A damping is tried at its limit with the spread of its component, variance / (1 - damping^2), left as it is.

use nalgebra::{DMatrix, DVector};

use crate::evaluation::EvaluationError;
use crate::objective::Objective;
use crate::starts;
use crate::structure::Link;

/// Predicted gain in log-likelihood below which one more step ends the climb. The step is taken: what it leaves
/// behind is a small share of this.
const LAST_GAIN: f64 = 1e-7;
/// Gain that a parameter held at its limit must promise to be freed again.
const REOPENING_GAIN: f64 = 1e-8;
/// Most evaluations of one climb.
const MOST: usize = 120;
/// Longest step on the unbounded side.
const STRIDE: f64 = 3.0;
/// A variance below this share of the largest one is tried at zero when it is still falling.
const SMALL: f64 = 1e-3;
/// A parameter with two ends is tried at the one it moves to when this share of its range is left.
const NEAR: f64 = 0.03;

/// The result of an estimation.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Estimate {
    /// All parameters in natural units, known ones included.
    pub(crate) values: Vec<f64>,
    /// Standard errors; NaN for known parameters, zeros, and directions that the data leave flat.
    pub(crate) std_errors: Vec<f64>,
    pub(crate) log_likelihood: f64,
    pub(crate) converged: bool,
    pub(crate) evaluations: usize,
}

/// Estimates the parameters that `known` leaves open (`None`). `observed`: the series, for the size of the starts.
///
/// # Errors
/// When the likelihood cannot be evaluated at any start.
pub(crate) fn maximise(
    objective: &mut Objective<'_>,
    known: &[Option<f64>],
    observed: &[f64],
) -> Result<Estimate, EvaluationError> {
    if known.iter().all(Option::is_some) {
        let values: Vec<f64> = known.iter().map(|k| k.unwrap_or(0.0)).collect();
        let value = objective.value(&values)?;
        return Ok(Estimate {
            std_errors: vec![f64::NAN; values.len()],
            values,
            log_likelihood: value.log_likelihood,
            converged: true,
            evaluations: objective.evaluations,
        });
    }
    let mut best: Option<Climb> = None;
    for start in starts::choose(objective, known, observed)? {
        let climb = match Climb::new(objective, known, start) {
            Ok(mut climb) => {
                climb.run(objective);
                climb
            }
            Err(_) => continue,
        };
        if best.as_ref().is_none_or(|b| climb.log_likelihood > b.log_likelihood) {
            best = Some(climb);
        }
    }
    let mut best = best.ok_or(EvaluationError::NotPositive)?;
    if !best.converged {
        best = best.without_one_more(objective, known);
    }
    Ok(Estimate {
        std_errors: best.std_errors(),
        values: best.values,
        log_likelihood: best.log_likelihood,
        converged: best.converged,
        evaluations: objective.evaluations,
    })
}

/// One climb from one start.
struct Climb {
    links: Vec<Link>,
    free: Vec<bool>,
    /// What a damping's variance is scaled with when the damping moves: index of the variance.
    spread_of: Vec<Option<usize>>,
    /// Free parameters that are held at a limit: variances at exactly zero, the others at an end of their range.
    held: Vec<bool>,
    /// Distance below which the limit is tried (again): a variance's own value, the share of the range that is left.
    try_below: Vec<f64>,
    values: Vec<f64>,
    log_likelihood: f64,
    gradient: Vec<f64>,
    information: Vec<f64>,
    converged: bool,
}

impl Climb {
    fn new(
        objective: &mut Objective<'_>,
        known: &[Option<f64>],
        values: Vec<f64>,
    ) -> Result<Self, EvaluationError> {
        let log_likelihood = objective.full(&values)?.log_likelihood;
        let p = values.len();
        Ok(Self {
            links: objective.model.parameters().iter().map(|s| s.link).collect(),
            spread_of: (0..p).map(|i| objective.model.variance_of_damping(i)).collect(),
            free: known.iter().map(Option::is_none).collect(),
            held: vec![false; p],
            try_below: vec![f64::INFINITY; p],
            values,
            log_likelihood,
            gradient: objective.gradient().to_vec(),
            information: objective.information().to_vec(),
            converged: false,
        })
    }

    fn run(&mut self, objective: &mut Objective<'_>) {
        let first = objective.evaluations;
        let mut lambda = 1e-3;
        while objective.evaluations - first < MOST {
            if self.try_limits(objective) {
                continue;
            }
            let Some((step, gain)) = self.step(&mut lambda) else {
                if self.reopen() {
                    continue;
                }
                self.converged = true;
                return;
            };
            let values: Vec<f64> = (0..step.len())
                .map(|i| {
                    if self.moves(i) { moved(self.links[i], self.values[i], step[i]) } else { self.values[i] }
                })
                .collect();
            if gain < LAST_GAIN {
                if self.reopen() {
                    continue;
                }
                self.finish(objective, values);
                return;
            }
            let before = self.log_likelihood;
            match objective.full(&values) {
                Ok(value) if value.log_likelihood > before - 1e-12 * (1.0 + before.abs()) => {
                    let ratio = (value.log_likelihood - before) / gain;
                    self.accept(objective, values, value.log_likelihood);
                    if ratio > 0.7 {
                        lambda = (lambda * 0.1).max(1e-8);
                    } else if ratio < 0.25 {
                        lambda = (lambda * 4.0).max(1e-3);
                    }
                }
                _ => {
                    lambda = (lambda * 10.0).max(1e-2);
                    if lambda > 1e10 {
                        // No step helps although the model predicts a gain: rounding has the last word.
                        self.converged = gain < 1e-4;
                        return;
                    }
                }
            }
        }
    }

    /// A climb that did not end may creep along a ridge towards a variance of zero, where the other parameters would have to move too before the
    /// likelihood is higher. Each variance that still falls is held at zero in turn, the others climb, and the best of all is taken.
    fn without_one_more(self, objective: &mut Objective<'_>, known: &[Option<f64>]) -> Self {
        let falling: Vec<usize> = (0..self.values.len())
            .filter(|&i| self.links[i] == Link::Variance && self.moves(i) && self.gradient[i] < 0.0)
            .collect();
        let mut best = self;
        for i in falling {
            let mut values = best.values.clone();
            values[i] = 0.0;
            let Ok(mut climb) = Self::new(objective, known, values) else { continue };
            climb.held[i] = true;
            climb.run(objective);
            let as_good = climb.log_likelihood >= best.log_likelihood - 1e-9;
            if climb.log_likelihood > best.log_likelihood || as_good && climb.converged && !best.converged {
                best = climb;
            }
        }
        best
    }

    /// Takes the last step if it does not lower the likelihood; score and information stay those of the point before.
    fn finish(&mut self, objective: &mut Objective<'_>, values: Vec<f64>) {
        self.converged = true;
        if let Ok(value) = objective.value(&values)
            && value.log_likelihood >= self.log_likelihood
        {
            self.values = values;
            self.log_likelihood = value.log_likelihood;
        }
    }

    fn moves(&self, i: usize) -> bool {
        self.free[i] && !self.held[i]
    }

    fn accept(&mut self, objective: &Objective<'_>, values: Vec<f64>, log_likelihood: f64) {
        self.values = values;
        self.log_likelihood = log_likelihood;
        self.gradient.copy_from_slice(objective.gradient());
        self.information.copy_from_slice(objective.information());
    }

    /// Solves for a step on the unbounded side and the gain it promises; raises `lambda` until it is not too long.
    fn step(&self, lambda: &mut f64) -> Option<(Vec<f64>, f64)> {
        let p = self.values.len();
        let moving: Vec<usize> = (0..p).filter(|&i| self.moves(i)).collect();
        if moving.is_empty() {
            return None;
        }
        let scale: Vec<f64> = moving.iter().map(|&i| derivative(self.links[i], self.values[i])).collect();
        let k = moving.len();
        let g = DVector::from_fn(k, |a, _| self.gradient[moving[a]] * scale[a]);
        let h =
            DMatrix::from_fn(k, k, |a, b| self.information[moving[a] * p + moving[b]] * scale[a] * scale[b]);
        if g.iter().chain(h.iter()).any(|v| !v.is_finite()) {
            return None;
        }
        let largest = h.diagonal().max().max(1e-12);
        loop {
            let mut damped = h.clone();
            for a in 0..k {
                damped[(a, a)] += *lambda * h[(a, a)].max(1e-6 * largest);
            }
            if let Some(factor) = damped.cholesky() {
                let x = factor.solve(&g);
                if x.amax() <= STRIDE {
                    let gain = g.dot(&x) - 0.5 * (&h * &x).dot(&x);
                    let mut step = vec![0.0; p];
                    for (a, &i) in moving.iter().enumerate() {
                        step[i] = x[a];
                    }
                    return Some((step, gain));
                }
            }
            *lambda = (*lambda * 3.0).max(1e-6);
            if *lambda > 1e12 {
                return None;
            }
        }
    }

    /// The limit that parameter `i` is near and still moves to, and how far away it is (see `try_below`).
    fn limit(&self, i: usize, largest: f64) -> Option<(f64, f64)> {
        let (value, slope) = (self.values[i], self.gradient[i]);
        match self.links[i] {
            Link::Variance => (slope < 0.0 && value < SMALL * largest).then_some((0.0, value)),
            Link::Between { low, high } => {
                let above = (value - low) / (high - low);
                if slope > 0.0 && 1.0 - above < NEAR {
                    Some((high, 1.0 - above))
                } else {
                    (slope < 0.0 && above < NEAR).then_some((low, above))
                }
            }
            Link::Free => None,
        }
    }

    /// Tries the limits of the parameters that are near them and still on the way; true when something changed.
    fn try_limits(&mut self, objective: &mut Objective<'_>) -> bool {
        let largest = (0..self.values.len())
            .filter(|&i| self.links[i] == Link::Variance)
            .fold(0.0_f64, |a, i| a.max(self.values[i]));
        let near: Vec<(usize, f64, f64)> = (0..self.values.len())
            .filter(|&i| self.moves(i))
            .filter_map(|i| self.limit(i, largest).map(|(at, distance)| (i, at, distance)))
            .filter(|&(i, _, distance)| distance < self.try_below[i])
            .collect();
        if near.is_empty() {
            return false;
        }
        if self.try_limit(objective, &near) {
            return true;
        }
        if near.len() > 1 {
            for one in &near {
                if self.try_limit(objective, &[*one]) {
                    return true;
                }
            }
        }
        for (i, _, distance) in near {
            self.try_below[i] = distance * if self.links[i] == Link::Variance { 1e-2 } else { 0.2 };
        }
        false
    }

    fn try_limit(&mut self, objective: &mut Objective<'_>, which: &[(usize, f64, f64)]) -> bool {
        let mut values = self.values.clone();
        for &(i, at, _) in which {
            if let Some(variance) = self.spread_of[i].filter(|&v| self.moves(v)) {
                values[variance] *= (1.0 - at * at) / (1.0 - values[i] * values[i]);
            }
            values[i] = at;
        }
        match objective.full(&values) {
            Ok(value) if value.log_likelihood >= self.log_likelihood - 1e-10 => {
                self.accept(objective, values, value.log_likelihood);
                for &(i, ..) in which {
                    self.held[i] = true;
                }
                true
            }
            _ => false,
        }
    }

    /// Frees held parameters whose score points inward by enough to matter; true when there was one.
    fn reopen(&mut self) -> bool {
        let p = self.values.len();
        let mut any = false;
        for i in 0..p {
            let (slope, curvature) = (self.gradient[i], self.information[i * p + i]);
            let gain = 0.5 * slope * slope / curvature;
            if !(self.held[i] && gain > REOPENING_GAIN && curvature > 0.0) {
                continue;
            }
            let value = self.values[i] + slope / curvature;
            match self.links[i] {
                Link::Variance if slope > 0.0 => {
                    self.values[i] = value;
                    self.try_below[i] = value * 1e-4;
                }
                Link::Between { low, high } if (self.values[i] == high) == (slope < 0.0) => {
                    let inside = 0.5 * NEAR * (high - low);
                    self.values[i] = value.clamp(low + inside, high - inside);
                    self.try_below[i] = 0.2 * NEAR;
                }
                _ => continue,
            }
            self.held[i] = false;
            any = true;
        }
        any
    }

    /// Square roots of the inverse information over the moving parameters, natural units.
    fn std_errors(&self) -> Vec<f64> {
        let p = self.values.len();
        // A damping whose variance sits at zero leaves the likelihood flat and must not hide the errors of the others.
        let tells = |i: usize| self.moves(i) && self.information[i * p + i] != 0.0;
        let moving: Vec<usize> = (0..p).filter(|&i| tells(i)).collect();
        let mut out = vec![f64::NAN; p];
        // Scaled to a unit diagonal first: variances of one model differ by many powers of ten.
        let size: Vec<f64> = moving.iter().map(|&i| self.information[i * p + i].sqrt()).collect();
        if size.iter().any(|s| !(*s > 0.0 && s.is_finite())) {
            return out;
        }
        let h = DMatrix::from_fn(moving.len(), moving.len(), |a, b| {
            self.information[moving[a] * p + moving[b]] / (size[a] * size[b])
        });
        if let Some(factor) = h.cholesky() {
            let inverse = factor.inverse();
            for (a, &i) in moving.iter().enumerate() {
                out[i] = inverse[(a, a)].sqrt() / size[a];
            }
        }
        out
    }
}

/// d value / d unbounded.
fn derivative(link: Link, value: f64) -> f64 {
    match link {
        Link::Variance => value,
        Link::Between { low, high } => (value - low) * (high - value) / (high - low),
        Link::Free => 1.0,
    }
}

/// The value after a step on the unbounded side.
fn moved(link: Link, value: f64, step: f64) -> f64 {
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
