//! The backward pass over a filtered series: the smoothing cumulants `r_t` and `N_t` (de Jong 1989, *JASA* 84;
//! DK 4.4-4.5, 5.3), with a column for each diffuse element.
//!
//! Everything is linear in the diffuse elements, so the pass works in the basis in which their posterior covariance is I. There
//! the correction of any variance is a plain sum of squares over the columns, and the mean path is a column of its own.
//!
//! **Back across the collapse.** Where the filter took the diffuse states into its state, `P = P_a + B B'`, with `e ~ N(0, I)` their
//! white form given the points before. Backward from there `e | y ~ N(B' r, M)`, `M = I - B' N B = L L'`, and the cumulants
//! given `e` are `r - N B L^-T w` and `N + C C'` with `C = -N B L^-T`, `w ~ N(0, I)` (Woodbury on `N = (J^-1 + P)^-1`, J the
//! information of the points to come). So `C` are the columns with which the pass goes on.

use crate::buffer::refill;
use crate::filter::{Data, Pass};
use crate::system::System;

/// Smallest squared pivot of `M` at which the way back across the collapse keeps its digits.
const SINGULAR: f64 = 1e-6;

/// The collapse cannot be undone in double precision on this series: run again with the columns kept open.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct NearlySingular;

/// What happens at each point, from the last to the first.
pub(crate) trait Visitor {
    /// The state's disturbance between `t` and `t + 1`: `r` is `m` rows of mean path and white columns, `n` is
    /// `m x m`. Its mean is `Q r`, its variance `Q - Q (n - r_w r_w') Q`.
    fn disturbance(&mut self, t: usize, r: &[f64], n: &[f64]);
    /// The irregular at an observed `t`: `u` is mean path and white columns, `weight` the cumulant's variance. Mean `h u`,
    /// variance `h - h^2 (weight - u_w u_w')`.
    fn irregular(&mut self, t: usize, u: &[f64], weight: f64);
    /// The state at `t`: `r` and `n` after the point has been taken in (`r_{t-1}`, `N_{t-1}`).
    fn state(&mut self, t: usize, r: &[f64], n: &[f64], basis: &Basis<'_>);
}

/// The white basis at a point.
pub(crate) struct Basis<'a> {
    pass: &'a Pass,
    crossing: &'a Crossing,
    t: usize,
}

impl Basis<'_> {
    /// Rewrites raw columns (of the predicted state, say) as mean path and white columns.
    pub(crate) fn whiten(&self, row: &mut [f64]) {
        self.pass.whiten(self.t, row);
        self.cross(row);
    }

    /// Writes the kept row of the point as mean path and white columns.
    pub(crate) fn row(&self, out: &mut [f64]) {
        out.copy_from_slice(self.pass.row(self.t));
        self.cross(out);
    }

    fn cross(&self, row: &mut [f64]) {
        if self.t < self.pass.collapsed_at && self.crossing.states > 0 {
            self.crossing.apply(row);
        }
    }
}

/// Posterior of the collapsed elements' white form: `e = mean + along w_2 + L w_1`.
#[derive(Debug, Clone, Default)]
struct Crossing {
    states: usize,
    mean: Vec<f64>,
    /// `states x drivers`.
    along: Vec<f64>,
    /// `states x states`, lower.
    lower: Vec<f64>,
}

impl Crossing {
    /// `[mean, e, w_2]` into `[mean, w_1, w_2]`, in place.
    fn apply(&self, row: &mut [f64]) {
        let k = self.states;
        let (head, others) = row.split_at_mut(1 + k);
        let drivers = others.len();
        for i in 0..k {
            let x = head[1 + i];
            head[0] += x * self.mean[i];
            for (to, from) in others.iter_mut().zip(&self.along[i * drivers..(i + 1) * drivers]) {
                *to += x * from;
            }
        }
        // x L with L lower: column j needs elements j.. only, so it can be overwritten in order.
        for j in 0..k {
            head[1 + j] = (j..k).map(|i| head[1 + i] * self.lower[i * k + j]).sum();
        }
    }
}

/// Buffers of the pass.
#[derive(Debug, Clone, Default)]
pub(crate) struct Cumulants {
    r: Vec<f64>,
    n: Vec<f64>,
    u: Vec<f64>,
    kn: Vec<f64>,
    crossing: Crossing,
    nb: Vec<f64>,
}

impl Cumulants {
    /// Final cumulants `r_0` (`m` rows) and `N_0` (`m x m`) after a pass.
    pub(crate) fn first(&self) -> (&[f64], &[f64]) {
        (&self.r, &self.n)
    }

    /// Takes the cumulants back across the collapse.
    fn cross(&mut self, pass: &Pass) -> Result<(), NearlySingular> {
        let (m, k, drivers) = (pass.m, pass.reduction.eliminated(), pass.width(pass.n) - 1);
        let b = &pass.bridge;
        let Self { r, n, crossing, nb, .. } = self;
        refill(nb, m * k);
        refill(&mut crossing.mean, k);
        refill(&mut crossing.along, k * drivers);
        refill(&mut crossing.lower, k * k);
        crossing.states = k;
        let narrow = 1 + drivers;
        for i in 0..m {
            for j in 0..m {
                let weight = n[i * m + j];
                for (to, from) in nb[i * k..(i + 1) * k].iter_mut().zip(&b[j * k..(j + 1) * k]) {
                    *to += weight * from;
                }
            }
            for c in 0..k {
                let weight = b[i * k + c];
                crossing.mean[c] += weight * r[i * narrow];
                for d in 0..drivers {
                    crossing.along[c * drivers + d] += weight * r[i * narrow + 1 + d];
                }
            }
        }
        // Cholesky of M = I - B' N B.
        for i in 0..k {
            for j in 0..=i {
                let mut rest = f64::from(u8::from(i == j));
                rest -= (0..m).map(|s| b[s * k + i] * nb[s * k + j]).sum::<f64>();
                rest -= (0..j).map(|c| crossing.lower[i * k + c] * crossing.lower[j * k + c]).sum::<f64>();
                crossing.lower[i * k + j] = if i == j {
                    if !(rest > SINGULAR) {
                        return Err(NearlySingular);
                    }
                    rest.sqrt()
                } else {
                    rest / crossing.lower[j * k + j]
                };
            }
        }
        // C = -N B L^-T, row by row.
        for row in nb.chunks_exact_mut(k) {
            for j in 0..k {
                let rest = -row[j] - (0..j).map(|c| row[c] * crossing.lower[j * k + c]).sum::<f64>();
                row[j] = rest / crossing.lower[j * k + j];
            }
        }
        for i in 0..m {
            for j in 0..m {
                n[i * m + j] += (0..k).map(|c| nb[i * k + c] * nb[j * k + c]).sum::<f64>();
            }
        }
        let wide = narrow + k;
        r.resize(m * wide, 0.0);
        for i in (0..m).rev() {
            r.copy_within(i * narrow + 1..(i + 1) * narrow, i * wide + 1 + k);
            r[i * wide] = r[i * narrow];
            r[i * wide + 1..][..k].copy_from_slice(&nb[i * k..(i + 1) * k]);
        }
        Ok(())
    }
}

/// Runs backward. `pass` must have kept its gains and had its rows whitened.
///
/// # Errors
/// When the collapse cannot be undone without loss; the caller filters again with [`Pass::keep_open`].
pub(crate) fn run(
    system: &System,
    data: Data<'_>,
    pass: &Pass,
    cumulants: &mut Cumulants,
    visitor: &mut impl Visitor,
) -> Result<(), NearlySingular> {
    let m = pass.m;
    let mut width = pass.width(pass.n);
    cumulants.crossing.states = 0;
    for (buffer, len) in [
        (&mut cumulants.r, m * width),
        (&mut cumulants.n, m * m),
        (&mut cumulants.u, 1 + pass.elements),
        (&mut cumulants.kn, m),
    ] {
        refill(buffer, len);
    }
    for t in (0..pass.n).rev() {
        if t + 1 == pass.collapsed_at {
            cumulants.cross(pass)?;
            width = pass.width(t);
        }
        let Cumulants { r, n, u, kn, crossing, .. } = &mut *cumulants;
        let basis = Basis { pass, crossing, t };
        visitor.disturbance(t, r, n);
        system.backward(r, width);
        system.pull_back(n);
        let f = pass.f[t];
        if !f.is_nan() {
            let inverse = 1.0 / f;
            let gain = &pass.gains[t * m..(t + 1) * m];
            let u = &mut u[..width];
            basis.row(u);
            u.iter_mut().for_each(|x| *x *= inverse);
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
        visitor.state(t, r, n, &basis);
    }
    Ok(())
}

impl Pass {
    /// Turns the kept rows into mean path and columns, white but for the collapsed elements before their collapse: those
    /// stand in their white form given the points before it.
    pub(crate) fn whiten_rows(&mut self) {
        for t in 0..self.n {
            let (start, width) = (t * (self.elements + 1), self.width(t));
            let Self { rows, reduction, collapsed_at, .. } = self;
            whiten_row(reduction, t < *collapsed_at, &mut rows[start..start + width]);
        }
    }

    /// The same for any raw row of columns at `t`.
    pub(crate) fn whiten(&self, t: usize, row: &mut [f64]) {
        whiten_row(&self.reduction, t < self.collapsed_at, row);
    }
}

fn whiten_row(reduction: &crate::reduction::Reduction, before_collapse: bool, row: &mut [f64]) {
    let first = if before_collapse { reduction.eliminated() } else { 0 };
    if first == 0 {
        reduction.whiten(row);
        return;
    }
    reduction.condition(row);
    // The others' columns stand behind the eliminated ones; whitening wants them behind the mean.
    let (head, others) = row.split_at_mut(1 + first);
    reduction.whiten_split(&mut head[0], others);
}
