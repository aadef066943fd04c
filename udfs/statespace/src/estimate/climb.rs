//! One climb from one start.
//!
//! **Limits.** A variance whose best value is zero would make its logarithm creep for ever, and so would a damping or a period whose
//! best value is the end of its range. As soon as one is near its limit and still on the way, the limit itself is tried: where the
//! likelihood is not lower there, the parameter is held there, exactly, and leaves the free set. It comes back if the score later
//! points inward. A damping is tried at its limit with the spread of its component, variance / (1 - damping^2), left as it is.

use super::layout::{Layout, moved};
use super::scoring::{Scoring, cholesky, substitute};
use super::{Answer, Question};
use crate::evaluation::EvaluationError;
use crate::structure::Link;

/// Predicted gain in log-likelihood below which one more step ends the climb. The step is taken: what it leaves
/// behind is a small share of this.
const LAST_GAIN: f64 = 1e-7;
/// Gain that a parameter held at its limit must promise to be freed again.
const REOPENING_GAIN: f64 = 1e-8;
/// Most evaluations of one climb.
const MOST: usize = 120;
/// A variance below this share of the largest one is tried at zero when it is still falling.
const SMALL: f64 = 1e-3;
/// A parameter with two ends is tried at the one it moves to when this share of its range is left.
const NEAR: f64 = 0.03;

/// What the answer that is awaited is for.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Asked {
    /// The start itself.
    Start,
    /// Limits that are near: 0 = all of them together, then one by one.
    Limits(usize),
    /// A step that promises this gain.
    Step { gain: f64 },
    /// The step that ends the climb.
    Last,
    /// Nothing: the climb has ended.
    Nothing,
}

/// A parameter near a limit that it still moves to: index, limit, distance.
type Near = (usize, f64, f64);

/// The state of a climb.
#[derive(Debug, Clone)]
pub(super) struct Climb {
    /// Free parameters that are held at a limit: variances at exactly zero, the others at an end of their range.
    held: Vec<bool>,
    /// Distance below which the limit is tried (again): a variance's own value, the share of the range that is left.
    try_below: Vec<f64>,
    pub(super) values: Vec<f64>,
    /// Minus infinity where the start could not be evaluated.
    pub(super) log_likelihood: f64,
    gradient: Vec<f64>,
    information: Vec<f64>,
    pub(super) converged: bool,
    /// The point that is asked about.
    candidate: Vec<f64>,
    asked: Asked,
    near: Vec<Near>,
    lambda: f64,
    spent: usize,
    scoring: Scoring,
}

impl Climb {
    /// A climb that asks for its start first. `held`: a parameter that stands at its limit there.
    pub(super) fn new(start: Vec<f64>, held: Option<usize>) -> Self {
        let p = start.len();
        Self {
            held: (0..p).map(|i| held == Some(i)).collect(),
            try_below: vec![f64::INFINITY; p],
            values: start.clone(),
            log_likelihood: f64::NEG_INFINITY,
            gradient: vec![0.0; p],
            information: vec![0.0; p * p],
            converged: false,
            candidate: start,
            asked: Asked::Start,
            near: Vec::with_capacity(p),
            lambda: 1e-3,
            spent: 0,
            scoring: Scoring::default(),
        }
    }

    pub(super) fn ask(&self) -> Option<Question<'_>> {
        (self.asked != Asked::Nothing)
            .then_some(Question { values: &self.candidate, derivatives: self.asked != Asked::Last })
    }

    pub(super) fn tell(&mut self, layout: &Layout, answer: Result<Answer<'_>, EvaluationError>) {
        match self.asked {
            Asked::Start => match answer {
                Ok(answer) => {
                    self.accept(answer);
                    self.proceed(layout);
                }
                Err(_) => self.asked = Asked::Nothing,
            },
            Asked::Limits(which) => {
                self.spent += 1;
                match answer {
                    Ok(answer) if answer.log_likelihood >= self.log_likelihood - 1e-10 => {
                        self.accept(answer);
                        for (index, &(i, ..)) in self.near.iter().enumerate() {
                            self.held[i] |= which == 0 || which == index + 1;
                        }
                        self.proceed(layout);
                    }
                    _ if self.near.len() > 1 && which < self.near.len() => {
                        self.ask_limits(layout, which + 1);
                    }
                    _ => {
                        for &(i, _, distance) in &self.near {
                            self.try_below[i] = distance * if layout.is_variance(i) { 1e-2 } else { 0.2 };
                        }
                        self.ask_step(layout);
                    }
                }
            }
            Asked::Step { gain } => {
                self.spent += 1;
                self.judge(layout, answer, gain);
            }
            Asked::Last => {
                // Score and information stay those of the point before.
                if let Ok(answer) = answer
                    && answer.log_likelihood >= self.log_likelihood
                {
                    self.values.copy_from_slice(&self.candidate);
                    self.log_likelihood = answer.log_likelihood;
                }
                self.end(true);
            }
            Asked::Nothing => {}
        }
    }

    fn end(&mut self, converged: bool) {
        self.converged = converged;
        self.asked = Asked::Nothing;
    }

    /// Takes a step or shortens the next one.
    fn judge(&mut self, layout: &Layout, answer: Result<Answer<'_>, EvaluationError>, gain: f64) {
        let before = self.log_likelihood;
        match answer {
            Ok(answer) if answer.log_likelihood > before - 1e-12 * (1.0 + before.abs()) => {
                let ratio = (answer.log_likelihood - before) / gain;
                self.accept(answer);
                if ratio > 0.7 {
                    self.lambda = (self.lambda * 0.1).max(1e-8);
                } else if ratio < 0.25 {
                    self.lambda = (self.lambda * 4.0).max(1e-3);
                }
                self.proceed(layout);
            }
            _ => {
                self.lambda = (self.lambda * 10.0).max(1e-2);
                if self.lambda > 1e10 {
                    // No step helps although the model predicts a gain: rounding has the last word.
                    self.end(gain < 1e-4);
                } else {
                    self.proceed(layout);
                }
            }
        }
    }

    fn accept(&mut self, answer: Answer<'_>) {
        self.values.copy_from_slice(&self.candidate);
        self.log_likelihood = answer.log_likelihood;
        self.gradient.copy_from_slice(answer.gradient);
        self.information.copy_from_slice(answer.information);
    }

    /// Finds what to ask next: limits that are near, else a step.
    fn proceed(&mut self, layout: &Layout) {
        if self.spent >= MOST {
            self.end(false);
            return;
        }
        let largest = (0..self.values.len())
            .filter(|&i| layout.is_variance(i))
            .fold(0.0_f64, |a, i| a.max(self.values[i]));
        let mut near = std::mem::take(&mut self.near);
        near.clear();
        near.extend(
            (0..self.values.len())
                .filter(|&i| self.moves(layout, i))
                .filter_map(|i| self.limit(layout, i, largest).map(|(at, distance)| (i, at, distance)))
                .filter(|&(i, _, distance)| distance < self.try_below[i]),
        );
        self.near = near;
        if self.near.is_empty() { self.ask_step(layout) } else { self.ask_limits(layout, 0) }
    }

    fn ask_limits(&mut self, layout: &Layout, which: usize) {
        self.candidate.copy_from_slice(&self.values);
        for (index, &(i, at, _)) in self.near.iter().enumerate() {
            if which != 0 && which != index + 1 {
                continue;
            }
            if let Some(variance) = layout.spread_of[i].filter(|&v| self.moves(layout, v)) {
                self.candidate[variance] *= (1.0 - at * at) / (1.0 - self.candidate[i] * self.candidate[i]);
            }
            self.candidate[i] = at;
        }
        self.asked = Asked::Limits(which);
    }

    fn ask_step(&mut self, layout: &Layout) {
        let (held, free) = (&self.held, &layout.free);
        let gain = self.scoring.solve(
            layout,
            |i| free[i] && !held[i],
            (&self.values, &self.gradient, &self.information),
            &mut self.lambda,
        );
        let Some(gain) = gain else {
            if self.reopen(layout) {
                self.proceed(layout);
            } else {
                self.end(true);
            }
            return;
        };
        self.candidate.copy_from_slice(&self.values);
        for i in 0..self.values.len() {
            if self.moves(layout, i) {
                self.candidate[i] = moved(layout.links[i], self.values[i], self.scoring.step[i]);
            }
        }
        if gain >= LAST_GAIN {
            self.asked = Asked::Step { gain };
        } else if self.reopen(layout) {
            self.spent += 1;
            self.proceed(layout);
        } else {
            self.asked = Asked::Last;
        }
    }

    fn moves(&self, layout: &Layout, i: usize) -> bool {
        layout.free[i] && !self.held[i]
    }

    /// The variances that still fall.
    pub(super) fn falling(&self, layout: &Layout) -> Vec<usize> {
        (0..self.values.len())
            .filter(|&i| layout.is_variance(i) && self.moves(layout, i) && self.gradient[i] < 0.0)
            .collect()
    }

    /// The limit that parameter `i` is near and still moves to, and how far away it is (see `try_below`).
    fn limit(&self, layout: &Layout, i: usize, largest: f64) -> Option<(f64, f64)> {
        let (value, slope) = (self.values[i], self.gradient[i]);
        match layout.links[i] {
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

    /// Frees held parameters whose score points inward by enough to matter; true when there was one.
    fn reopen(&mut self, layout: &Layout) -> bool {
        let p = self.values.len();
        let mut any = false;
        for i in 0..p {
            let (slope, curvature) = (self.gradient[i], self.information[i * p + i]);
            let gain = 0.5 * slope * slope / curvature;
            if !(self.held[i] && gain > REOPENING_GAIN && curvature > 0.0) {
                continue;
            }
            let value = self.values[i] + slope / curvature;
            match layout.links[i] {
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
    pub(super) fn std_errors(&self, layout: &Layout) -> Vec<f64> {
        let p = self.values.len();
        // A damping whose variance sits at zero leaves the likelihood flat and must not hide the errors of the others.
        let tells = |i: usize| self.moves(layout, i) && self.information[i * p + i] != 0.0;
        let moving: Vec<usize> = (0..p).filter(|&i| tells(i)).collect();
        let k = moving.len();
        let mut out = vec![f64::NAN; p];
        // Scaled to a unit diagonal first: variances of one model differ by many powers of ten.
        let size: Vec<f64> = moving.iter().map(|&i| self.information[i * p + i].sqrt()).collect();
        if size.iter().any(|s| !(*s > 0.0 && s.is_finite())) {
            return out;
        }
        let mut factor: Vec<f64> = (0..k * k)
            .map(|at| {
                let (a, b) = (at / k, at % k);
                self.information[moving[a] * p + moving[b]] / (size[a] * size[b])
            })
            .collect();
        if cholesky(&mut factor, k) {
            let mut column = vec![0.0; k];
            for (a, &i) in moving.iter().enumerate() {
                column.fill(0.0);
                column[a] = 1.0;
                substitute(&factor, k, &mut column);
                out[i] = column[a].sqrt() / size[a];
            }
        }
        out
    }
}
