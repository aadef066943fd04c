//! Running totals of forecast steps on a transformed scale.
//!
//! The steps are functions of jointly normal variables: the mean of their sum is exact, its variance too for the logarithm; for a power the
//! covariances of different steps are Mehler's expansion to its twelfth term. The interval of the sum is that of a law with
//! these moments: for the logarithm the lognormal (Fenton 1960, *IRE Trans. Communications Systems* 8, 57-67), for Box-Cox with power
//! `lambda` the law whose own power `lambda` is normal (what Wilson & Hilferty 1931, *PNAS* 17, do for sums of squares), which for
//! `lambda = 1` is the normal law itself.

use crate::forecast::Step;
use crate::normal_law::{self, TERMS};
use crate::transform::{self, Transform};

/// What the steps so far add up to.
pub(crate) struct Totals {
    transform: Transform,
    unit: f64,
    shift: f64,
    z: f64,
    steps: Vec<StepMoments>,
    total: f64,
    /// Variance of the total over its squared mean, which stays in range where the variance does not.
    relative: f64,
    /// Interval of the total, step by step.
    pub(crate) ends: Vec<(f64, f64)>,
}

/// One step before: what its covariance with later ones is made of.
struct StepMoments {
    /// Mean on the data's scale (log1p: of one plus the value).
    expected: f64,
    /// Standard deviation on the model scale, variance on the data's, and the expansion (Box-Cox alone).
    expansion: Option<(f64, f64, [f64; TERMS])>,
}

impl Totals {
    /// `unit` and `shift` undo the working scale; `z` is the normal quantile of the interval's upper end.
    pub(crate) fn new(transform: Transform, unit: f64, shift: f64, z: f64) -> Self {
        Self { transform, unit, shift, z, steps: Vec::new(), total: 0.0, relative: 0.0, ends: Vec::new() }
    }

    /// The power whose covariances need the expansion.
    fn power(&self) -> Option<f64> {
        self.transform.power().filter(|&power| power > 0.0)
    }

    /// Adds a step. For the logarithm `Cov(exp x, exp y) = E exp x E exp y (exp(cov) - 1)`.
    pub(crate) fn add(&mut self, step: &Step<'_>) {
        let square = self.unit * self.unit;
        let (m, v) = (step.mean * self.unit + self.shift, step.variance * square);
        let moments = match self.power() {
            Some(_) => {
                let (expected, sd) = self.transform.moments(m, v);
                let back = |x| self.transform.back(x);
                let coefficients = normal_law::coefficients(m, v, self.transform.kink(), back);
                StepMoments { expected, expansion: Some((v.sqrt(), sd * sd, coefficients)) }
            }
            None => StepMoments { expected: transform::lognormal(m, v).0, expansion: None },
        };
        let before = self.total;
        self.total += moments.expected;
        let total = self.total;
        let share = |part: f64| if total > 0.0 { part / total } else { 0.0 };
        let mut relative = self.relative * share(before).powi(2);
        for (earlier, c) in self.steps.iter().zip(step.with_earlier) {
            relative += 2.0
                * match (&earlier.expansion, &moments.expansion) {
                    (Some((s, _, a)), Some((r, _, b))) => {
                        let rho = if s * r > 0.0 { c * square / (s * r) } else { 0.0 };
                        share(share(normal_law::covariance(a, b, rho)))
                    }
                    _ => share(earlier.expected) * share(moments.expected) * (c * square).min(700.0).exp_m1(),
                };
        }
        relative += match &moments.expansion {
            Some((_, variance, _)) => share(share(*variance)),
            None => share(moments.expected).powi(2) * v.min(700.0).exp_m1(),
        };
        self.relative = relative;
        self.steps.push(moments);
        let ends = match self.power() {
            Some(power) => power_normal_ends(total, relative, power, self.z),
            None => {
                let (m, v) = transform::lognormal_with_moments(total, relative);
                ((m - self.z * v.sqrt()).exp(), (m + self.z * v.sqrt()).exp())
            }
        };
        // One plus the value was added up in each step.
        let counted = if self.transform == Transform::Log1p { self.steps.len() as f64 } else { 0.0 };
        self.ends.push((ends.0 - counted, ends.1 - counted));
    }
}

/// Ends of `scale (1 + c u)^(1/power)`, `u ~ N(0, 1)`, zero where the bracket is negative, with this mean and relative variance.
fn power_normal_ends(mean: f64, relative_variance: f64, power: f64, z: f64) -> (f64, f64) {
    // ln_1p keeps the digits of small powers, whose c is small too.
    let value = |c: f64, u: f64| if c * u <= -1.0 { 0.0 } else { ((c * u).ln_1p() / power).exp() };
    let moments = |c: f64| normal_law::moments(0.0, 1.0, -1.0 / c, |u| value(c, u));
    // The relative variance grows with c: halve the bracket in the logarithm.
    let (mut low, mut high) = (1e-8 * power, 1e2_f64);
    for _ in 0..80 {
        let middle = (low * high).sqrt();
        let (mean, sd) = moments(middle);
        if (sd / mean).powi(2) < relative_variance {
            low = middle;
        } else {
            high = middle;
        }
        if high / low < 1.0 + 1e-12 {
            break;
        }
    }
    let c = (low * high).sqrt();
    let scale = mean / moments(c).0;
    (scale * value(c, -z), scale * value(c, z))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Towards power zero the law becomes the lognormal.
    #[test]
    fn small_powers_are_nearly_the_lognormal() {
        let (m, v) = transform::lognormal_with_moments(50.0, 0.04);
        for power in [1e-3, 1e-6, 1e-9] {
            let (low, high) = power_normal_ends(50.0, 0.04, power, 1.5);
            let ends = ((m - 1.5 * v.sqrt()).exp(), (m + 1.5 * v.sqrt()).exp());
            let near = 1e-6 + 2.0 * power;
            assert!(
                (low / ends.0 - 1.0).abs() < near && (high / ends.1 - 1.0).abs() < near,
                "{power}: {low} {high} {ends:?}"
            );
        }
    }

    #[test]
    fn power_one_is_the_normal_law() {
        let (low, high) = power_normal_ends(100.0, 0.01, 1.0, 1.5);
        assert!((low - 85.0).abs() < 1e-7 && (high - 115.0).abs() < 1e-7, "{low} {high}");
    }

    /// The sum of k squared standard normals has mean k and variance 2k; its 95 % point for k = 10 is 18.307, its 5 % point 3.940
    /// (Abramowitz & Stegun 1964, table 26.8). The cube-root normal law is known to be good to about 1 % there.
    #[test]
    fn a_third_is_the_law_of_wilson_and_hilferty() {
        let (low, high) = power_normal_ends(10.0, 0.2, 1.0 / 3.0, 1.644_853_626_951);
        assert!((low / 3.940 - 1.0).abs() < 0.01 && (high / 18.307 - 1.0).abs() < 0.01, "{low} {high}");
    }
}
