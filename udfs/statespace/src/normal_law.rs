//! Integrals over the normal law, for transforms whose moments have no closed form.
//!
//! `E g(m + s u)`, `u ~ N(0, 1)`, by Gauss-Legendre quadrature (Abramowitz & Stegun 1964, 25.4.30) over panels between -12 and 12, or from
//! the point on below which `g` is zero: a rule for smooth functions must not run across a kink, nor end at a root. Covariances of functions of
//! jointly normal variables come from Mehler's expansion, `Cov(g, k) = sum_j rho^j / j! E[g He_j] E[k He_j]` (Lancaster 1957, *Biometrika*
//! 44, 289-292).

use std::f64::consts::TAU;
use std::sync::OnceLock;

/// Points per panel.
const POINTS: usize = 16;
/// Panels over the whole line.
const PANELS: usize = 10;
/// The normal law ends here: beyond are 1e-32 of it, enough for the second moment of steep functions.
const END: f64 = 12.0;
/// Terms of Mehler's expansion.
pub(crate) const TERMS: usize = 12;

/// Nodes and weights on [-1, 1], by Newton's method on the Legendre polynomial.
fn legendre() -> &'static [(f64, f64); POINTS] {
    static RULE: OnceLock<[(f64, f64); POINTS]> = OnceLock::new();
    RULE.get_or_init(|| {
        std::array::from_fn(|i| {
            let n = POINTS as f64;
            let mut x = (std::f64::consts::PI * (i as f64 + 0.75) / (n + 0.5)).cos();
            let mut derivative = 1.0;
            for _ in 0..100 {
                let (mut p, mut before) = (1.0, 0.0);
                for k in 0..POINTS {
                    let k = k as f64;
                    (p, before) = (((2.0 * k + 1.0) * x * p - k * before) / (k + 1.0), p);
                }
                derivative = n * (x * p - before) / (x * x - 1.0);
                let step = p / derivative;
                x -= step;
                if step.abs() < 1e-16 {
                    break;
                }
            }
            (x, 2.0 / ((1.0 - x * x) * derivative * derivative))
        })
    })
}

/// Calls `f(u, weight)` for the points of a rule for `E f(u)`, `u ~ N(0, 1)`, of which only `u > from` counts.
///
/// Where the function begins inside the law, it may begin like a root: the rule runs in `w = sqrt(u - from)` then, in which it is smooth.
fn for_points(from: f64, mut f: impl FnMut(f64, f64)) {
    let rooted = from > -END;
    let from = from.clamp(-END, END);
    let length = if rooted { (END - from).sqrt() } else { END - from };
    let width = length / PANELS as f64;
    for panel in 0..PANELS {
        for &(x, weight) in legendre() {
            let w = width * (panel as f64 + 0.5 + 0.5 * x);
            let (u, stretch) = if rooted { (from + w * w, 2.0 * w) } else { (from + w, 1.0) };
            f(u, 0.5 * width * weight * stretch * (-0.5 * u * u).exp() / TAU.sqrt());
        }
    }
}

/// Mean and standard deviation of `g(N(m, v))`, where `g` is zero at and below `kink`.
pub(crate) fn moments(m: f64, v: f64, kink: f64, g: impl Fn(f64) -> f64) -> (f64, f64) {
    let s = v.sqrt();
    if !(s > 0.0) {
        return (g(m), 0.0);
    }
    let mut values = Vec::with_capacity(POINTS * PANELS);
    let (mut mean, mut mass) = (0.0, 0.0);
    for_points((kink - m) / s, |u, weight| {
        let value = g(m + s * u);
        values.push((value, weight));
        mean += weight * value;
        mass += weight;
    });
    let below = (1.0 - mass).max(0.0);
    let variance = values.iter().map(|(value, weight)| weight * (value - mean).powi(2)).sum::<f64>();
    (mean, (variance + below * mean * mean).sqrt())
}

/// `E[g(m + s u) He_j(u)] / sqrt(j!)` for `j = 1..=TERMS`: what the covariance of two such functions is made of.
pub(crate) fn coefficients(m: f64, v: f64, kink: f64, g: impl Fn(f64) -> f64) -> [f64; TERMS] {
    let mut out = [0.0; TERMS];
    let s = v.sqrt();
    if !(s > 0.0) {
        return out;
    }
    for_points((kink - m) / s, |u, weight| {
        let value = weight * g(m + s * u);
        // Normalised: He_{j+1} / sqrt((j+1)!) from the two before it.
        let (mut h, mut before) = (u, 1.0);
        for (j, c) in out.iter_mut().enumerate() {
            *c += value * h;
            let k = (j + 1) as f64;
            (h, before) = ((u * h - k.sqrt() * before) / (k + 1.0).sqrt(), h);
        }
    });
    out
}

/// Covariance of two functions of normal variables with correlation `rho`, from their [`coefficients`].
pub(crate) fn covariance(a: &[f64; TERMS], b: &[f64; TERMS], rho: f64) -> f64 {
    let rho = rho.clamp(-1.0, 1.0);
    a.iter().zip(b).rev().fold(0.0, |sum, (x, y)| rho * (sum + x * y))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #![proptest_config(ProptestConfig { cases: 32, failure_persistence: None, ..ProptestConfig::default() })]

        /// Polynomials and exponentials have moments in closed form.
        #[test]
        fn moments_are_those_in_closed_form(m in -2.0..4.0f64, s in 0.01..1.5f64) {
            let v = s * s;
            let none = f64::NEG_INFINITY;
            let (mean, sd) = moments(m, v, none, |x| x * x);
            prop_assert!((mean - (m * m + v)).abs() < 1e-12 * (1.0 + mean));
            let variance = 2.0 * v * v + 4.0 * m * m * v;
            prop_assert!((sd * sd - variance).abs() < 1e-11 * (1.0 + variance));
            let (mean, sd) = moments(m, v, none, f64::exp);
            let exact = (m + 0.5 * v).exp();
            prop_assert!((mean / exact - 1.0).abs() < 1e-12);
            prop_assert!((sd / (exact * v.exp_m1().sqrt()) - 1.0).abs() < 1e-10);
        }

        /// `Cov(exp X, exp Y) = E exp X E exp Y (exp(cov) - 1)`.
        #[test]
        fn covariances_are_those_of_lognormals(s in 0.05..0.8f64, r in 0.05..0.8f64, rho in -1.0..1.0f64) {
            let a = coefficients(0.3, s * s, f64::NEG_INFINITY, f64::exp);
            let b = coefficients(-0.2, r * r, f64::NEG_INFINITY, f64::exp);
            let means = (0.3 + 0.5 * s * s).exp() * (-0.2 + 0.5 * r * r).exp();
            let exact = means * (rho * s * r).exp_m1();
            prop_assert!((covariance(&a, &b, rho) - exact).abs() < 1e-9);
        }

        /// A normal variable cut at zero: E max(X, 0) = m P(X > 0) + s f(m / s) (Tobin 1958).
        #[test]
        fn a_kink_costs_no_digits(m in -1.0..3.0f64, s in 0.2..2.0f64) {
            let (mean, _) = moments(m, s * s, 0.0, |x| x.max(0.0));
            let density = (-0.5 * (m / s).powi(2)).exp() / TAU.sqrt();
            let tail = 0.5 * crate::quantile::normal_two_sided_tail(m / s);
            let above = if m > 0.0 { 1.0 - tail } else { tail };
            prop_assert!((mean - (m * above + s * density)).abs() < 1e-12);
        }

        /// Square roots begin steeply: against a midpoint rule with a million points.
        #[test]
        fn a_root_costs_few_digits(m in -0.5..2.0f64, s in 0.3..1.5f64) {
            let root = |x: f64| x.max(0.0).sqrt();
            let (mean, _) = moments(m, s * s, 0.0, root);
            let steps = 1_000_000;
            let slow: f64 = (0..steps)
                .map(|i| {
                    let u = -12.0 + 24.0 * (f64::from(i) + 0.5) / f64::from(steps);
                    root(m + s * u) * (-0.5 * u * u).exp() / TAU.sqrt() * 24.0 / f64::from(steps)
                })
                .sum();
            // The slow rule runs across the root: its own error is of the order of the step (2.4e-5) to the power 3/2.
            prop_assert!((mean - slow).abs() < 1e-7, "{mean} {slow}");
        }
    }
}
