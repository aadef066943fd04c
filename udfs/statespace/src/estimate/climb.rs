//! One climb from one start.
//!
//! **Limits.** A variance whose best value is zero is put there by the step (`scoring`); where the likelihood is lower there, the step is
//! taken in logarithms. A damping or a period whose best value is the end of its range would make its logit creep for ever. As soon as one is near
//! its end and still on the way, the end itself is tried: where the likelihood is not lower there, the parameter is held there, exactly, and leaves the free
//! set. It comes back if the score later points inward. A damping is tried at its end with the spread of its component,
//! variance / (1 - damping^2), left as it is. A slope that is damped to nothing is noise of the level: that end of its damping is tried as a level with
//! the variances of both, and no slope.

use super::layout::Layout;
use super::point::{Point, reached};
use super::scoring::{Scoring, cholesky, substitute};
use super::{Answer, Question};
use crate::evaluation::EvaluationError;
use crate::structure::Link;

/// Predicted gain in log-likelihood below which one more step ends the climb. The step is taken without another look: what it leaves
/// behind is a small share of this.
pub(super) const LAST_GAIN: f64 = 1e-7;
/// The same for a climb that only looks for a start.
pub(super) const ROUGH: f64 = 1e-6;
/// Gain that a parameter at its limit must promise to be freed again.
const REOPENING_GAIN: f64 = 1e-8;
/// Most evaluations of one climb.
const MOST: usize = 120;
/// A parameter with two ends is tried at the one it moves to when this share of its range is left.
const NEAR: f64 = 0.03;

/// What the answer that is awaited is for.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Asked {
    /// The start itself.
    Start,
    /// Ends that are near: 0 = all of them together, then one by one.
    Limits(usize),
    /// A step that promises this gain.
    Step { gain: f64 },
    /// Nothing: the climb has ended.
    Nothing,
}

/// A parameter near an end that it still moves to: index, end, share of the range that is left.
type Near = (usize, f64, f64);

/// The state of a climb.
#[derive(Debug, Clone)]
pub(super) struct Climb {
    /// Parameters that are held: at an end of their range, or a variance that is left out.
    held: Vec<bool>,
    /// Size below which a variance may be put to zero (again); share of the range below which an end is tried (again).
    try_below: Vec<f64>,
    pub(super) point: Point,
    pub(super) converged: bool,
    /// The point that is asked about.
    candidate: Vec<f64>,
    asked: Asked,
    near: Vec<Near>,
    lambda: f64,
    spent: usize,
    last_gain: f64,
    /// A climb that does not promise to come above this is given up.
    floor: f64,
    scoring: Scoring,
}

impl Climb {
    /// A climb that asks for its start first. `held`: a parameter that stays where it is; `last_gain`: gain below which it ends.
    pub(super) fn new(start: Vec<f64>, held: Option<usize>, last_gain: f64) -> Self {
        let p = start.len();
        Self {
            held: (0..p).map(|i| held == Some(i)).collect(),
            try_below: vec![f64::INFINITY; p],
            candidate: start.clone(),
            point: Point::new(start),
            converged: false,
            asked: Asked::Start,
            near: Vec::with_capacity(p),
            lambda: 1e-3,
            spent: 0,
            last_gain,
            floor: f64::NEG_INFINITY,
            scoring: Scoring::default(),
        }
    }

    /// Starts over from another start, in the same buffers; given up when it does not promise to come above `floor`.
    pub(super) fn begin_again(&mut self, start: &[f64], held: Option<usize>, last_gain: f64, floor: f64) {
        let p = start.len();
        self.held.clear();
        self.held.extend((0..p).map(|i| held == Some(i)));
        self.try_below.clear();
        self.try_below.resize(p, f64::INFINITY);
        self.candidate.clear();
        self.candidate.extend_from_slice(start);
        self.point.begin_again(start);
        self.scoring.forget();
        (self.converged, self.asked, self.lambda, self.spent) = (false, Asked::Start, 1e-3, 0);
        (self.last_gain, self.floor) = (last_gain, floor);
    }

    /// The same, given up when it does not promise to come above `floor`.
    pub(super) fn above(self, floor: f64) -> Self {
        Self { floor, ..self }
    }

    /// Sets free what was held for the start's sake; true when there is more to ask.
    pub(super) fn go_on(&mut self, layout: &Layout) -> bool {
        let mut changed = false;
        for i in 0..self.held.len() {
            changed |= self.held[i] && layout.is_variance(i);
            self.held[i] &= !layout.is_variance(i);
        }
        if changed {
            self.proceed(layout);
        }
        self.asked != Asked::Nothing
    }

    pub(super) fn ask(&self) -> Option<Question<'_>> {
        (self.asked != Asked::Nothing).then_some(Question { values: &self.candidate, derivatives: true })
    }

    pub(super) fn tell(&mut self, layout: &Layout, answer: Result<Answer<'_>, EvaluationError>) {
        self.spent += 1;
        match self.asked {
            Asked::Start => match answer {
                Ok(answer) => {
                    for i in 0..self.held.len() {
                        self.held[i] |= self.at_end(layout, i);
                    }
                    self.accept(layout, answer);
                    self.proceed(layout);
                }
                Err(_) => self.asked = Asked::Nothing,
            },
            Asked::Limits(which) => match answer {
                Ok(answer) if reached(layout, &answer) >= self.point.log_likelihood - 1e-10 => {
                    for (index, &(i, ..)) in self.near.iter().enumerate() {
                        self.held[i] |= (which == 0 || which == index + 1) && self.at_end(layout, i);
                    }
                    self.accept(layout, answer);
                    self.proceed(layout);
                }
                _ if self.near.len() > 1 && which < self.near.len() => self.ask_limits(layout, which + 1),
                _ => {
                    for &(i, _, distance) in &self.near {
                        self.try_below[i] = distance * 0.2;
                    }
                    self.ask_step(layout);
                }
            },
            Asked::Step { gain } => self.judge(layout, answer, gain),
            Asked::Nothing => {}
        }
    }

    /// The candidate has parameter `i` at an end of its range.
    fn at_end(&self, layout: &Layout, i: usize) -> bool {
        let value = self.candidate[i];
        matches!(layout.links[i], Link::Between { low, high } if value == low || value == high)
    }

    fn end(&mut self, converged: bool) {
        self.converged = converged;
        self.asked = Asked::Nothing;
    }

    /// Takes a step or shortens the next one.
    fn judge(&mut self, layout: &Layout, answer: Result<Answer<'_>, EvaluationError>, gain: f64) {
        let before = self.point.log_likelihood;
        match answer {
            Ok(answer) if reached(layout, &answer) > before - 1e-12 * (1.0 + before.abs()) => {
                let ratio = (reached(layout, &answer) - before) / gain;
                self.accept(layout, answer);
                if ratio > 0.7 {
                    self.lambda = (self.lambda * 0.1).max(1e-8);
                } else if ratio < 0.25 {
                    self.lambda = (self.lambda * 4.0).max(1e-3);
                }
                self.proceed(layout);
            }
            _ => {
                let mut fell = false;
                for i in 0..self.held.len() {
                    if self.scoring.falls(i) {
                        fell = true;
                        self.try_below[i] = 0.1 * self.point.values[i];
                    }
                }
                if !fell {
                    self.lambda = (self.lambda * 10.0).max(1e-2);
                }
                if self.lambda > 1e10 {
                    // No step helps although the model predicts a gain: rounding has the last word.
                    self.end(gain < 1e-4);
                } else {
                    self.proceed(layout);
                }
            }
        }
    }

    fn accept(&mut self, layout: &Layout, answer: Answer<'_>) {
        for i in 0..self.held.len() {
            if self.held[i]
                && !self.at_end(layout, i)
                && let Link::Between { low, high } = layout.links[i]
            {
                // It left its end; back there only when it has come much nearer.
                self.held[i] = false;
                let left = (high - self.candidate[i]).min(self.candidate[i] - low);
                self.try_below[i] = 0.2 * left / (high - low);
            }
        }
        self.point.take(layout, &self.candidate, answer);
    }

    /// Finds what to ask next: ends that are near, else a step.
    fn proceed(&mut self, layout: &Layout) {
        if self.spent >= MOST {
            self.end(false);
            return;
        }
        self.near.clear();
        for i in 0..self.held.len() {
            if layout.free[i]
                && !self.held[i]
                && let Some((at, distance)) = self.limit(layout, i)
                && distance < self.try_below[i]
            {
                self.near.push((i, at, distance));
            }
        }
        if self.near.is_empty() {
            self.ask_step(layout);
        } else {
            self.ask_limits(layout, 0);
        }
    }

    fn ask_limits(&mut self, layout: &Layout, which: usize) {
        self.candidate.copy_from_slice(&self.point.values);
        for (index, &(i, at, _)) in self.near.iter().enumerate() {
            if which != 0 && which != index + 1 {
                continue;
            }
            if let Some(variance) = layout.spread_of[i].filter(|&v| layout.free[v] && !self.held[v]) {
                self.candidate[variance] *= (1.0 - at * at) / (1.0 - self.candidate[i] * self.candidate[i]);
                if let (0.0, Some(level)) = (at, layout.level_of[i]) {
                    self.candidate[level] += self.candidate[variance];
                    self.candidate[variance] = 0.0;
                    continue;
                }
            }
            self.candidate[i] = at;
        }
        self.asked = Asked::Limits(which);
    }

    fn ask_step(&mut self, layout: &Layout) {
        let (values, try_below) = (&self.point.values, &self.try_below);
        let gain = self.scoring.propose(
            layout,
            &self.point,
            (&self.held, |i| values[i] < try_below[i]),
            REOPENING_GAIN,
            &mut self.lambda,
            &mut self.candidate,
        );
        match gain {
            // Far from an optimum the quadratic foretells too little more often than too much.
            Some(gain) if self.point.log_likelihood + 2.0 * gain + 0.01 < self.floor => self.end(false),
            // A variance is not left out without a look.
            Some(gain) if gain >= self.last_gain || self.scoring.some_fall() => {
                self.asked = Asked::Step { gain };
            }
            gain => {
                if let Some(gain) = gain {
                    // Score and information stay those of the point before.
                    self.point.values.copy_from_slice(&self.candidate);
                    self.point.log_likelihood += gain.max(0.0);
                }
                self.end(true);
            }
        }
    }

    /// The variances that still fall.
    pub(super) fn falling(&self, layout: &Layout) -> Vec<usize> {
        (0..self.held.len())
            .filter(|&i| layout.is_variance(i) && layout.free[i] && !self.held[i])
            .filter(|&i| self.point.values[i] > 0.0 && self.point.gradient[i] < 0.0)
            .collect()
    }

    /// The end that parameter `i` is near and still moves to, and the share of the range that is left.
    fn limit(&self, layout: &Layout, i: usize) -> Option<(f64, f64)> {
        let (value, slope) = (self.point.values[i], self.point.gradient[i]);
        let Link::Between { low, high } = layout.links[i] else { return None };
        let above = (value - low) / (high - low);
        if slope > 0.0 && 1.0 - above < NEAR {
            Some((high, 1.0 - above))
        } else {
            (slope < 0.0 && above < NEAR).then_some((low, above))
        }
    }

    /// Square roots of the inverse information over the moving parameters, natural units.
    pub(super) fn std_errors(&self, layout: &Layout) -> Vec<f64> {
        let p = self.held.len();
        let (values, information) = (&self.point.values, &self.point.information);
        // A damping whose variance sits at zero leaves the likelihood flat and must not hide the errors of the others.
        let moves = |i: usize| layout.free[i] && !self.held[i] && (!layout.is_variance(i) || values[i] > 0.0);
        let tells = |i: usize| moves(i) && information[i * p + i] != 0.0;
        let moving: Vec<usize> = (0..p).filter(|&i| tells(i)).collect();
        let k = moving.len();
        let mut out = vec![f64::NAN; p];
        // Scaled to a unit diagonal first: variances of one model differ by many powers of ten.
        let size: Vec<f64> = moving.iter().map(|&i| information[i * p + i].sqrt()).collect();
        if size.iter().any(|s| !(*s > 0.0 && s.is_finite())) {
            return out;
        }
        let mut factor: Vec<f64> = (0..k * k)
            .map(|at| {
                let (a, b) = (at / k, at % k);
                information[moving[a] * p + moving[b]] / (size[a] * size[b])
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
