//! The damped scoring step, in buffers that are used again.
//!
//! It solves `(H + lambda D) x = g` (Levenberg 1944; Marquardt 1963; Moré 1978, *Numerical Analysis*, LNM 630) with the exact
//! score `g`, in logarithms of variances and logits of what has two ends.
//!
//! **Curvature.** Average information uses squares where expected information has traces; their ratio is 1 at the maximum and nowhere else. `H`
//! is the average information with each row and column multiplied by the fourth root of (trace / squares), the geometric mean
//! of the two kinds: for a single variance the step is then `r^(1/2) - r^(-1/2)`, `r` = squares / trace, which agrees with the exact answer `log r` to second order,
//! where either kind alone is right to first order only.
//!
//! Near the maximum what is left of the error of `H` is taken out by the change of the score along the last step (secant condition).
//!
//! **Coordinates.** A variance that is small beside others moves the likelihood linearly, one that rules moves it in the logarithm. Between
//! the two lies `log(a + theta)` with `a` chosen such that `rho = theta / (a + theta)` is the share of its own weight in its direction,
//! `rho = theta tr(P V_i P V_i) / tr(P V_i)`; a step `x` in the logarithm becomes `theta (1 + (exp(rho x) - 1) / rho)`, which reaches zero in one step where the quadratic
//! lies below zero.
//!
//! A damping moves with the spread of its component, variance / (1 - damping^2), left as it is: the two lie on a ridge otherwise.
//!
//! **Zeros.** A variance that its step takes to zero is put there, exactly, and the others step given that (active set). One at
//! zero takes part while its score points inward.

use super::layout::{Layout, derivative, moved};
use super::point::Point;
use crate::structure::Link;

/// Longest step on the unbounded side.
const STRIDE: f64 = 3.0;
/// Share of its own weight above which a variance is not put to zero in one step.
const RULES: f64 = 0.95;
/// A longer step says little about the curvature where it ends.
const LONGEST_SECANT: f64 = 1.0;

/// Part of a parameter in a step.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Part {
    /// Stays as it is.
    Rests,
    /// Moves on the unbounded side.
    Moves,
    /// Leaves zero, or an end of its range, in this direction.
    Leaves(f64),
    /// A variance that is put to zero.
    Falls,
}

/// The step and the buffers it takes.
#[derive(Debug, Clone, Default)]
pub(super) struct Scoring {
    part: Vec<Part>,
    /// Unit of the step in each parameter, natural.
    unit: Vec<f64>,
    /// Score and curvature in these units.
    g: Vec<f64>,
    h: Vec<f64>,
    /// Step in these units.
    step: Vec<f64>,
    /// Share of its own weight, of each variance.
    share: Vec<f64>,
    moving: Vec<usize>,
    factor: Vec<f64>,
    x: Vec<f64>,
    secant: Secant,
}

/// The last step between two points, and how the score changed along it.
#[derive(Debug, Clone, Default)]
struct Secant {
    /// Position on the unbounded side and score of the last point; position NaN where a parameter did not move.
    position: Vec<f64>,
    score: Vec<f64>,
    step: Vec<f64>,
    change: Vec<f64>,
    /// `H` times the step.
    foretold: Vec<f64>,
}

impl Secant {
    /// Takes the point that has been reached.
    fn arrive(&mut self, position: &[f64], score: &[f64]) {
        let same_point = self.position.iter().zip(position).all(|(a, b)| a == b || a.is_nan() && b.is_nan());
        if same_point && self.position.len() == position.len() {
            return;
        }
        self.step.clear();
        self.change.clear();
        let same_parts = self.position.iter().zip(position).all(|(a, b)| a.is_nan() == b.is_nan());
        if same_parts && self.position.len() == position.len() {
            self.step.extend(
                position.iter().zip(&self.position).map(|(a, b)| if a.is_nan() { 0.0 } else { a - b }),
            );
            self.change.extend(self.score.iter().zip(score).map(|(a, b)| a - b));
            for (change, position) in self.change.iter_mut().zip(position) {
                if position.is_nan() {
                    *change = 0.0;
                }
            }
        }
        self.position.clear();
        self.position.extend_from_slice(position);
        self.score.clear();
        self.score.extend_from_slice(score);
    }

    /// Makes `h` agree with the last step (Broyden 1970; Fletcher 1970; Goldfarb 1970; Shanno 1970), where that step was neither too
    /// far from the quadratic nor too long.
    fn improve(&mut self, h: &mut [f64]) {
        let p = self.step.len();
        self.foretold.clear();
        for i in 0..p {
            self.foretold.push((0..p).map(|j| h[i * p + j] * self.step[j]).sum());
        }
        let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
        let (foretold, seen) = (dot(&self.step, &self.foretold), dot(&self.step, &self.change));
        let longest = self.step.iter().fold(0.0_f64, |a, s| a.max(s.abs()));
        if !(longest < LONGEST_SECANT && foretold > 0.0 && seen > 0.1 * foretold && seen < 10.0 * foretold) {
            return;
        }
        for i in 0..p {
            for j in 0..p {
                h[i * p + j] +=
                    self.change[i] * self.change[j] / seen - self.foretold[i] * self.foretold[j] / foretold;
            }
        }
    }
}

impl Scoring {
    /// Forgets the last step.
    pub(super) fn forget(&mut self) {
        self.secant.position.clear();
        self.secant.step.clear();
        self.secant.change.clear();
    }

    /// Writes the point that the step leads to into `candidate` and returns the gain it promises; raises `lambda` until the step is not too
    /// long. `None`: nothing moves, or no step can be had. `held`: parameters that stay at an end; `may_fall`: variances that may be put to zero;
    /// `least`: gain that a variance must promise to leave zero.
    pub(super) fn propose(
        &mut self,
        layout: &Layout,
        point: &Point,
        (held, may_fall): (&[bool], impl Fn(usize) -> bool),
        least: f64,
        lambda: &mut f64,
        candidate: &mut [f64],
    ) -> Option<f64> {
        let p = candidate.len();
        self.set_up(layout, point, held, least);
        if self.g.iter().chain(&self.h).any(|v| !v.is_finite()) {
            return None;
        }
        // Each turn takes a variance out or ends.
        for _ in 0..=2 * p {
            self.moving.clear();
            let part = &self.part;
            self.moving.extend((0..p).filter(|&i| matches!(part[i], Part::Moves | Part::Leaves(_))));
            if self.moving.is_empty() && !self.part.contains(&Part::Falls) {
                return None;
            }
            if !self.solve(p, lambda) {
                return None;
            }
            let mut settled = true;
            for i in 0..p {
                let x = self.step[i];
                match self.part[i] {
                    Part::Leaves(inward) if x * inward <= 0.0 => {
                        self.part[i] = Part::Rests;
                        settled = false;
                    }
                    Part::Moves if layout.is_variance(i) && may_fall(i) => {
                        let rho = self.share[i];
                        if rho < RULES && (rho * x).exp() <= 1.0 - 0.98 * rho {
                            self.part[i] = Part::Falls;
                            settled = false;
                        }
                    }
                    _ => {}
                }
            }
            if settled {
                break;
            }
        }
        for i in 0..p {
            let (value, x) = (point.values[i], self.step[i]);
            candidate[i] = match self.part[i] {
                Part::Rests => value,
                Part::Falls => 0.0,
                Part::Leaves(_) => inside(layout.links[i], value + x * self.unit[i]),
                Part::Moves if layout.is_variance(i) && may_fall(i) => {
                    let rho = self.share[i];
                    value * (1.0 + (rho * x).exp_m1() / rho).max(0.02)
                }
                Part::Moves => moved(layout.links[i], value, x),
            };
        }
        for i in 0..p {
            if let Some(variance) = self.rides(layout, i) {
                let (before, after) = (point.values[i], candidate[i]);
                candidate[variance] *= (1.0 - after * after) / (1.0 - before * before);
            }
        }
        let along: f64 = (0..p).map(|i| self.g[i] * self.step[i]).sum();
        let curved: f64 = (0..p)
            .map(|i| self.step[i] * (0..p).map(|j| self.h[i * p + j] * self.step[j]).sum::<f64>())
            .sum();
        Some(along - 0.5 * curved)
    }

    /// True when the last step puts some variance to zero.
    pub(super) fn some_fall(&self) -> bool {
        self.part.contains(&Part::Falls)
    }

    /// True when the last step puts variance `i` to zero.
    pub(super) fn falls(&self, i: usize) -> bool {
        self.part[i] == Part::Falls
    }

    /// The variance that moves along with damping `i` so that the spread of its component stays.
    fn rides(&self, layout: &Layout, i: usize) -> Option<usize> {
        layout.spread_of[i].filter(|&v| self.part[i] == Part::Moves && self.part[v] == Part::Moves)
    }

    fn set_up(&mut self, layout: &Layout, point: &Point, held: &[bool], least: f64) {
        let p = held.len();
        for buffer in [&mut self.unit, &mut self.g, &mut self.step, &mut self.share] {
            buffer.clear();
            buffer.resize(p, 0.0);
        }
        self.h.clear();
        self.h.resize(p * p, 0.0);
        self.part.clear();
        self.part.resize(p, Part::Rests);
        // The fourth root of (trace / squares), kept in `step` for the moment.
        for i in 0..p {
            let curvature = point.information[i * p + i];
            let (squares, trace) = (point.squares[i], point.trace(i));
            let ratio = if layout.linear && layout.is_variance(i) && squares > 0.0 && trace > 0.0 {
                (trace / squares).clamp(0.02, 50.0)
            } else {
                1.0
            };
            self.step[i] = ratio.sqrt().sqrt();
            let value = point.values[i];
            let slope = point.gradient[i];
            let gain = 0.5 * slope * slope / curvature;
            if held[i]
                && let Link::Between { high, .. } = layout.links[i]
                && curvature > 0.0
                && gain > least
                && (value == high) == (slope < 0.0)
            {
                self.part[i] = Part::Leaves(slope.signum());
                self.unit[i] = 1.0 / curvature.sqrt();
            }
            if !layout.free[i] || held[i] {
                continue;
            }
            self.share[i] = if layout.linear && squares > 0.0 {
                (2.0 * value * curvature / squares * ratio).clamp(0.01, 1.0)
            } else {
                1.0
            };
            if layout.links[i] == Link::Variance && value == 0.0 {
                if slope > 0.0 && curvature > 0.0 && gain > least {
                    self.part[i] = Part::Leaves(1.0);
                    self.unit[i] = 1.0 / curvature.sqrt();
                }
            } else {
                self.part[i] = Part::Moves;
                self.unit[i] = derivative(layout.links[i], value);
            }
        }
        for i in 0..p {
            self.g[i] = point.gradient[i] * self.unit[i];
            for j in 0..p {
                let scale = self.unit[i] * self.unit[j] * self.step[i] * self.step[j];
                self.h[i * p + j] = point.information[i * p + j] * scale;
            }
        }
        for i in 0..p {
            let Some(variance) = self.rides(layout, i) else { continue };
            // d log variance / d logit of the damping at a constant spread.
            let along = -2.0 * point.values[i] * self.unit[i] / (1.0 - point.values[i].powi(2));
            self.g[i] += along * self.g[variance];
            for j in 0..p {
                self.h[i * p + j] += along * self.h[variance * p + j];
            }
            for j in 0..p {
                self.h[j * p + i] += along * self.h[j * p + variance];
            }
        }
        // `step` holds the position for the moment.
        for i in 0..p {
            let value = point.values[i];
            self.step[i] = match (self.part[i], layout.links[i]) {
                (Part::Moves, Link::Variance) => value.ln(),
                (Part::Moves, Link::Between { low, high }) => ((value - low) / (high - value)).ln(),
                (Part::Moves, Link::Free) => value,
                _ => f64::NAN,
            };
        }
        for i in 0..p {
            if let Some(variance) = self.rides(layout, i) {
                self.step[variance] -= (1.0 - point.values[i].powi(2)).ln();
            }
        }
        self.secant.arrive(&self.step, &self.g);
        self.secant.improve(&mut self.h);
    }

    /// Solves for the moving ones given those that fall to zero.
    fn solve(&mut self, p: usize, lambda: &mut f64) -> bool {
        let Self { part, g, h, step, moving, factor, x, .. } = self;
        let k = moving.len();
        for i in 0..p {
            step[i] = if part[i] == Part::Falls { -1.0 } else { 0.0 };
        }
        let largest = moving.iter().fold(1e-12_f64, |a, &i| a.max(h[i * p + i]));
        if k == 0 {
            return true;
        }
        loop {
            factor.clear();
            x.clear();
            for (a, &i) in moving.iter().enumerate() {
                factor.extend(moving.iter().map(|&j| h[i * p + j]));
                factor[a * k + a] += *lambda * h[i * p + i].max(1e-6 * largest);
                let fallen: f64 = (0..p).filter(|&j| part[j] == Part::Falls).map(|j| h[i * p + j]).sum();
                x.push(g[i] + fallen);
            }
            if cholesky(factor, k) {
                substitute(factor, k, x);
                let short = |(x, &i): (&f64, &usize)| x.abs() <= STRIDE || matches!(part[i], Part::Leaves(_));
                if x.iter().zip(moving.iter()).all(short) {
                    for (x, &i) in x.iter().zip(moving.iter()) {
                        step[i] = *x;
                    }
                    return true;
                }
            }
            *lambda = (*lambda * 3.0).max(1e-6);
            if *lambda > 1e12 {
                return false;
            }
        }
    }
}

/// A value that left an end of its range.
fn inside(link: Link, value: f64) -> f64 {
    match link {
        Link::Between { low, high } => {
            let range = high - low;
            value.clamp(low + 1e-6 * range, high - 1e-6 * range)
        }
        _ => value.max(0.0),
    }
}

/// Lower Cholesky factor of a symmetric `k x k` row-major matrix in place (the upper part is left as it was); false where it is
/// not positive definite (Golub & Van Loan, *Matrix Computations*, 4th ed., 4.2).
pub(super) fn cholesky(a: &mut [f64], k: usize) -> bool {
    for j in 0..k {
        let mut pivot = a[j * k + j];
        for l in 0..j {
            pivot -= a[j * k + l] * a[j * k + l];
        }
        if !(pivot > 0.0 && pivot.is_finite()) {
            return false;
        }
        let pivot = pivot.sqrt();
        a[j * k + j] = pivot;
        for i in j + 1..k {
            let mut sum = a[i * k + j];
            for l in 0..j {
                sum -= a[i * k + l] * a[j * k + l];
            }
            a[i * k + j] = sum / pivot;
        }
    }
    true
}

/// Solves `L L' x = b` in place with a factor of [`cholesky`].
pub(super) fn substitute(factor: &[f64], k: usize, x: &mut [f64]) {
    for i in 0..k {
        let known: f64 = (0..i).map(|l| factor[i * k + l] * x[l]).sum();
        x[i] = (x[i] - known) / factor[i * k + i];
    }
    for i in (0..k).rev() {
        let known: f64 = (i + 1..k).map(|l| factor[l * k + i] * x[l]).sum();
        x[i] = (x[i] - known) / factor[i * k + i];
    }
}
