//! The damped scoring step on the unbounded side, in buffers that are used again.
//!
//! It solves `(H + lambda D) x = g` (Levenberg 1944; Marquardt 1963; Moré 1978, *Numerical Analysis*, LNM 630) with the exact
//! score `g` and the average information `H`, both taken to the unbounded side of each parameter (log variances, logits).

use super::layout::{Layout, derivative};

/// Longest step on the unbounded side.
const STRIDE: f64 = 3.0;

/// The step and the buffers it takes.
#[derive(Debug, Clone, Default)]
pub(super) struct Scoring {
    /// Step of each parameter on the unbounded side; zero where it is held.
    pub(super) step: Vec<f64>,
    moving: Vec<usize>,
    g: Vec<f64>,
    h: Vec<f64>,
    factor: Vec<f64>,
    x: Vec<f64>,
}

impl Scoring {
    /// Solves for a step of the parameters that `moves` and returns the gain it promises; raises `lambda` until the step is not too
    /// long. `None`: nothing moves, or no step can be had.
    pub(super) fn solve(
        &mut self,
        layout: &Layout,
        moves: impl Fn(usize) -> bool,
        (values, gradient, information): (&[f64], &[f64], &[f64]),
        lambda: &mut f64,
    ) -> Option<f64> {
        let p = values.len();
        self.step.clear();
        self.step.resize(p, 0.0);
        self.moving.clear();
        self.moving.extend((0..p).filter(|&i| moves(i)));
        let k = self.moving.len();
        if k == 0 {
            return None;
        }
        let Self { moving, g, h, factor, x, .. } = self;
        g.clear();
        h.clear();
        for &i in moving.iter() {
            let scale = derivative(layout.links[i], values[i]);
            g.push(gradient[i] * scale);
            h.extend(
                moving
                    .iter()
                    .map(|&j| information[i * p + j] * scale * derivative(layout.links[j], values[j])),
            );
        }
        if g.iter().chain(h.iter()).any(|v| !v.is_finite()) {
            return None;
        }
        let largest = (0..k).fold(1e-12_f64, |a, i| a.max(h[i * k + i]));
        loop {
            factor.clear();
            factor.extend_from_slice(h);
            for a in 0..k {
                factor[a * k + a] += *lambda * h[a * k + a].max(1e-6 * largest);
            }
            if cholesky(factor, k) {
                x.clear();
                x.extend_from_slice(g);
                substitute(factor, k, x);
                if x.iter().all(|v| v.abs() <= STRIDE) {
                    let curved: f64 =
                        (0..k).map(|a| x[a] * (0..k).map(|b| h[a * k + b] * x[b]).sum::<f64>()).sum();
                    let gain = g.iter().zip(x.iter()).map(|(a, b)| a * b).sum::<f64>() - 0.5 * curved;
                    for (x, &i) in x.iter().zip(moving.iter()) {
                        self.step[i] = *x;
                    }
                    return Some(gain);
                }
            }
            *lambda = (*lambda * 3.0).max(1e-6);
            if *lambda > 1e12 {
                return None;
            }
        }
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
