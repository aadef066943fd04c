//! The backward pass over a filtered series: the smoothing cumulants `r_t` and `N_t` (de Jong 1989, *JASA* 84;
//! DK 4.4-4.5, 5.3), with a column for each diffuse element.
//!
//! Everything is linear in the diffuse elements, so the pass first changes their basis to the one in which
//! their posterior covariance is I ([`Pass::whiten_rows`]). There the correction of any variance is a plain
//! sum of squares over the columns, and the mean path is one column of its own.

use crate::filter::{Data, Pass};
use crate::system::System;

/// What happens at each point, from the last to the first.
pub(crate) trait Visitor {
    /// The state's disturbance between `t` and `t + 1`: `r` is `m x (1 + d)` (mean path, then white columns), `n` is
    /// `m x m`. Its mean is `Q r`, its variance `Q - Q (n - r_w r_w') Q`.
    fn disturbance(&mut self, t: usize, r: &[f64], n: &[f64]);
    /// The irregular at an observed `t`: `u` is `1 + d` wide, `weight` the cumulant's variance. Mean `h u`, variance
    /// `h - h^2 (weight - u_w u_w')`.
    fn irregular(&mut self, t: usize, u: &[f64], weight: f64);
    /// The state at `t`: `r` and `n` after the point has been taken in (`r_{t-1}`, `N_{t-1}`).
    fn state(&mut self, t: usize, r: &[f64], n: &[f64]);
}

/// Buffers of the pass.
#[derive(Debug, Clone, Default)]
pub(crate) struct Cumulants {
    r: Vec<f64>,
    n: Vec<f64>,
    u: Vec<f64>,
    kn: Vec<f64>,
}

impl Cumulants {
    /// Final cumulants `r_0` (`m x (1 + d)`) and `N_0` (`m x m`) after a pass.
    pub(crate) fn first(&self) -> (&[f64], &[f64]) {
        (&self.r, &self.n)
    }
}

/// Runs backward. `pass` must have kept its gains and had its rows whitened.
pub(crate) fn run(
    system: &System,
    data: Data<'_>,
    pass: &Pass,
    cumulants: &mut Cumulants,
    visitor: &mut impl Visitor,
) {
    let (m, width) = (pass.m, pass.elements + 1);
    let Cumulants { r, n, u, kn } = cumulants;
    for (buffer, len) in [(&mut *r, m * width), (&mut *n, m * m), (&mut *u, width), (&mut *kn, m)] {
        buffer.clear();
        buffer.resize(len, 0.0);
    }
    for t in (0..pass.n).rev() {
        visitor.disturbance(t, r, n);
        system.backward(r, width);
        system.pull_back(n);
        let f = pass.f[t];
        if !f.is_nan() {
            let inverse = 1.0 / f;
            let gain = &pass.gains[t * m..(t + 1) * m];
            for (to, from) in u.iter_mut().zip(&pass.rows[t * width..(t + 1) * width]) {
                *to = from * inverse;
            }
            kn.fill(0.0);
            for (i, &k) in gain.iter().enumerate() {
                if k != 0.0 {
                    for (to, from) in u.iter_mut().zip(&r[i * width..(i + 1) * width]) {
                        *to -= k * from;
                    }
                    for (to, from) in kn.iter_mut().zip(&n[i * m..(i + 1) * m]) {
                        *to += k * from;
                    }
                }
            }
            let weight = inverse + gain.iter().zip(kn.iter()).map(|(k, v)| k * v).sum::<f64>();
            visitor.irregular(t, u, weight);
            system.for_loads(data.drifting, t, |state, load| {
                for (to, from) in r[state * width..(state + 1) * width].iter_mut().zip(u.iter()) {
                    *to += load * from;
                }
            });
            // N <- N - z kn' - kn z' + weight z z'
            system.for_loads(data.drifting, t, |state, load| {
                for j in 0..m {
                    n[state * m + j] -= load * kn[j];
                }
                for j in 0..m {
                    n[j * m + state] -= load * kn[j];
                }
            });
            system.for_loads(data.drifting, t, |i, a| {
                system.for_loads(data.drifting, t, |j, b| n[i * m + j] += weight * a * b);
            });
        }
        visitor.state(t, r, n);
    }
}

impl Pass {
    /// Turns the kept rows into mean path and white columns: `row[0] + row[1..] delta`, `row[1..] R^-1`.
    pub(crate) fn whiten_rows(&mut self) {
        let width = self.elements + 1;
        for row in self.rows.chunks_exact_mut(width) {
            whiten_row(&self.reduction, row);
        }
    }

    /// The same for any row of columns, such as those of the predicted state.
    pub(crate) fn whiten(&self, row: &mut [f64]) {
        whiten_row(&self.reduction, row);
    }
}

fn whiten_row(reduction: &crate::reduction::Reduction, row: &mut [f64]) {
    let (mean, columns) = row.split_at_mut(1);
    reduction.whiten(columns);
    for (i, c) in columns.iter().enumerate() {
        mean[0] += c * reduction.white_estimate(i);
    }
}
