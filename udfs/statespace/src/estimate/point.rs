//! A point of the likelihood with its shape, brought to the best common scale of all variances.
//!
//! With `V` linear in the variances, `sum_j theta_j V_j = V`, the average information tells more than curvature: its row sums
//! `sum_j A_ij theta_j = 1/2 y' P V_i P y` are the squares that each score sets against its trace `tr(P V_i)`. So both are known apart, and
//! score and information at any common multiple of the variances follow without another evaluation (likelihood concentrated in the scale: DK
//! 2.10.2; average information: Gilmour, Thompson & Cullis 1995, *Biometrics* 51).

use super::Answer;
use super::layout::Layout;
use crate::buffer::refill;

/// One-step errors below the square root of this share of the series' own movement are rounding.
pub(crate) const EXACT: f64 = 1e-22;

/// A point and what is known there.
#[derive(Debug, Clone, Default)]
pub(super) struct Point {
    /// Natural units.
    pub(super) values: Vec<f64>,
    pub(super) log_likelihood: f64,
    pub(super) gradient: Vec<f64>,
    /// Row-major.
    pub(super) information: Vec<f64>,
    /// `y' P V_i P y` of each variance.
    pub(super) squares: Vec<f64>,
}

impl Point {
    pub(super) fn new(values: Vec<f64>) -> Self {
        let p = values.len();
        Self {
            values,
            log_likelihood: f64::NEG_INFINITY,
            gradient: vec![0.0; p],
            information: vec![0.0; p * p],
            squares: vec![0.0; p],
        }
    }

    /// Forgets what was known and stands at other values.
    pub(super) fn begin_again(&mut self, values: &[f64]) {
        let p = values.len();
        self.values.clear();
        self.values.extend_from_slice(values);
        self.log_likelihood = f64::NEG_INFINITY;
        for (buffer, len) in [(&mut self.gradient, p), (&mut self.information, p * p), (&mut self.squares, p)]
        {
            refill(buffer, len);
        }
    }

    /// Moves to `values`, where `answer` was given, and on to the best common scale. The likelihood reached is [`reached`]'s.
    pub(super) fn take(&mut self, layout: &Layout, values: &[f64], answer: Answer<'_>) {
        let p = values.len();
        self.values.copy_from_slice(values);
        self.gradient.copy_from_slice(answer.gradient);
        self.information.copy_from_slice(answer.information);
        self.log_likelihood = reached(layout, &answer);
        for i in 0..p {
            let row = &self.information[i * p..(i + 1) * p];
            self.squares[i] =
                2.0 * (0..p).filter(|&j| layout.is_variance(j)).map(|j| row[j] * self.values[j]).sum::<f64>();
        }
        let s = best_scale(layout, &answer);
        if s == 1.0 {
            return;
        }
        for i in 0..p {
            let trace = self.squares[i] - 2.0 * self.gradient[i];
            let of_i = if layout.is_variance(i) {
                self.values[i] *= s;
                self.squares[i] /= s * s;
                self.gradient[i] = 0.5 * (self.squares[i] - trace / s);
                s
            } else {
                self.squares[i] /= s;
                self.gradient[i] = 0.5 * (self.squares[i] - trace);
                1.0
            };
            for j in 0..p {
                self.information[i * p + j] /= s * of_i * if layout.is_variance(j) { s } else { 1.0 };
            }
        }
    }

    /// `tr(P V_i)`: what the squares of variance `i` are expected to be.
    pub(super) fn trace(&self, i: usize) -> f64 {
        self.squares[i] - 2.0 * self.gradient[i]
    }
}

/// The common factor of all variances at which the likelihood is highest; 1 where known variances fix the scale.
pub(super) fn best_scale(layout: &Layout, answer: &Answer<'_>) -> f64 {
    let s = answer.rss / answer.degrees;
    if layout.scaled && answer.degrees > 0.0 && s > EXACT && s.is_finite() { s } else { 1.0 }
}

/// The log-likelihood there.
pub(super) fn reached(layout: &Layout, answer: &Answer<'_>) -> f64 {
    let s = best_scale(layout, answer);
    if s == 1.0 {
        answer.log_likelihood
    } else {
        answer.log_likelihood - 0.5 * (answer.degrees * s.ln() + answer.rss / s - answer.rss)
    }
}
