//! The score (gradient of the log-likelihood) from one smoothing pass.
//!
//! Koopman & Shephard (1992), *Biometrika* 79, 823-826; DK 7.3.3. For a variance that disturbs states S the score is
//! `1/2 sum_t sum_S (r_t^2 - N_t)`, for the irregular `1/2 sum_t (u_t^2 - D_t)`. For a parameter of `T` Fisher's identity gives
//! `sum_t tr(dT' E[Q^-1 n_t a_t'])` with `E[Q^-1 n_t a_t' | y] = r_t a_t' - N_t T P_{t|t}`, which needs no inverse of Q and so
//! holds at zero variances. A proper start adds `1/2 tr(dP_1 (r_0 r_0' - N_0))`. The white columns of the
//! diffuse elements correct each second moment.

use crate::backward::{self, Basis, Cumulants, Visitor};
use crate::buffer::refill;
use crate::data::Data;
use crate::derivatives::Derivative;
use crate::dynamics::{Dynamics, packed_at};
use crate::filter::Pass;
use crate::lanes::{Mask, Real};

/// Mean paths of the smoothing pass; the average information is built on them.
#[derive(Debug, Clone, Default)]
pub(crate) struct Paths<V> {
    /// `n x m`: `r_t`, the cumulant of the disturbance between `t` and `t + 1`.
    pub(crate) r: Vec<V>,
    /// `n`: `u_t`, the cumulant of the irregular; zero where missing.
    pub(crate) u: Vec<V>,
    /// `m`: `r_0`, the cumulant of the start.
    pub(crate) r_first: Vec<V>,
}

/// Score of each lane's series and its buffers.
#[derive(Debug, Clone, Default)]
pub(crate) struct Score<V> {
    /// Derivative of the log-likelihood in each parameter, natural units.
    pub(crate) gradient: Vec<V>,
    pub(crate) paths: Paths<V>,
    moments: Moments<V>,
    cumulants: Cumulants<V>,
}

/// Sums over time and copies of the step before, reused from pass to pass.
#[derive(Debug, Clone, Default)]
struct Moments<V> {
    irregular: V,
    /// States whose disturbance has a parameter for its variance.
    disturbed: Vec<usize>,
    /// Per state: `1/2 sum (r^2 - N)`.
    per_state: Vec<V>,
    /// Per parameter: the same along the loads of a shared disturbance.
    shared: Vec<V>,
    /// Per parameter: the part that comes through `T`.
    through_transition: Vec<V>,
    r_after: Vec<V>,
    n_after: Vec<V>,
    smoothed: Vec<V>,
    vector: Vec<V>,
    spare: Vec<V>,
}

impl<V: Real> Score<V> {
    /// Runs the smoothing pass over `pass`, which must have kept gains (and everything, if the model has parameters
    /// that are not variances) and had its rows whitened. Returns the lanes in which it failed, as [`backward::run`].
    #[inline(always)]
    pub(crate) fn compute(
        &mut self,
        derivatives: &[Derivative<V>],
        dynamics: &Dynamics<V>,
        data: &Data<V>,
        pass: &Pass<V>,
    ) -> Mask {
        let (n, m, width) = (pass.n, pass.m, pass.elements + 1);
        let shapes = derivatives.iter().any(|d| !d.transition.is_empty());
        self.paths.r.resize(n * m, V::zero());
        self.paths.u.resize(n, V::zero());
        let moments = &mut self.moments;
        moments.irregular = V::zero();
        moments.disturbed.clear();
        moments.disturbed.extend(derivatives.iter().flat_map(|d| &d.states));
        refill(&mut moments.per_state, m);
        refill(&mut moments.shared, derivatives.len());
        refill(&mut moments.through_transition, derivatives.len());
        refill(&mut moments.r_after, m * width);
        refill(&mut moments.n_after, m * (m + 1) / 2);
        refill(&mut moments.smoothed, width);
        refill(&mut moments.vector, m);
        refill(&mut moments.spare, dynamics.spare_len());
        let mut collect = Collect {
            dynamics,
            pass,
            derivatives,
            shapes,
            paths: &mut self.paths,
            moments: &mut self.moments,
        };
        let failed = backward::run(dynamics, data, pass, &mut self.cumulants, &mut collect);
        let (r, n0) = self.cumulants.first();
        let width = pass.width(0);
        self.paths.r_first.clear();
        self.paths.r_first.extend(r.iter().step_by(width));
        self.gradient.clear();
        for (index, derivative) in derivatives.iter().enumerate() {
            let mut g = self.moments.through_transition[index] + self.moments.shared[index];
            if derivative.irregular {
                g += self.moments.irregular;
            }
            for &state in &derivative.states {
                g += self.moments.per_state[state];
            }
            for &(i, j, value) in &derivative.start {
                let (a, b) = (&r[i * width..(i + 1) * width], &r[j * width..(j + 1) * width]);
                let product = along(a, b);
                g += (value * (product - n0[packed_at(i, j)])).times(0.5);
            }
            self.gradient.push(g);
        }
        failed
    }
}

struct Collect<'a, V> {
    dynamics: &'a Dynamics<V>,
    pass: &'a Pass<V>,
    derivatives: &'a [Derivative<V>],
    shapes: bool,
    paths: &'a mut Paths<V>,
    moments: &'a mut Moments<V>,
}

impl<V: Real> Visitor<V> for Collect<'_, V> {
    #[inline(always)]
    fn disturbance(&mut self, t: usize, r: &[V], n: &[V]) {
        let m = self.pass.m;
        let width = r.len() / m.max(1);
        for (to, from) in self.paths.r[t * m..(t + 1) * m].iter_mut().zip(r.iter().step_by(width.max(1))) {
            *to = *from;
        }
        for &i in &self.moments.disturbed {
            let row = &r[i * width..(i + 1) * width];
            self.moments.per_state[i] += (along(row, row) - n[packed_at(i, i)]).times(0.5);
        }
        for (index, derivative) in self.derivatives.iter().enumerate() {
            if derivative.loads.is_empty() {
                continue;
            }
            let (mut spread, mut squares) = (V::zero(), V::zero());
            for &(i, a) in &derivative.loads {
                for &(j, b) in &derivative.loads {
                    spread += n[packed_at(i, j)].times(a * b);
                }
            }
            for c in 0..width {
                let mut sum = V::zero();
                for &(i, a) in &derivative.loads {
                    sum += r[i * width + c].times(a);
                }
                squares += sum * sum;
            }
            self.moments.shared[index] += (squares - spread).times(0.5);
        }
        if self.shapes {
            self.moments.r_after[..r.len()].copy_from_slice(r);
            self.moments.n_after.copy_from_slice(n);
        }
    }

    #[inline(always)]
    fn irregular(&mut self, t: usize, u: &[V], weight: V) {
        self.paths.u[t] = u[0];
        self.moments.irregular += (along(u, u) - weight).times(0.5);
    }

    #[inline(always)]
    fn state(&mut self, t: usize, r: &[V], _n: &[V], basis: &Basis<'_, V>) {
        // After the last point of a series r and N are zero, and with them its share.
        if !self.shapes || t + 1 == self.pass.n {
            return;
        }
        for (index, derivative) in self.derivatives.iter().enumerate() {
            for &(row, column, value) in &derivative.transition {
                let moment =
                    self.moments.of_transition(self.dynamics, self.pass, (t, basis), r, (row, column));
                self.moments.through_transition[index] += value * moment;
            }
        }
    }
}

impl<V: Real> Moments<V> {
    /// `E[(Q^-1 n_t)_row (a_t)_column | y]`; `r` is `r_{t-1}`.
    #[inline(always)]
    fn of_transition(
        &mut self,
        dynamics: &Dynamics<V>,
        pass: &Pass<V>,
        (t, basis): (usize, &Basis<'_, V>),
        r: &[V],
        (row, column): (usize, usize),
    ) -> V {
        let (m, width) = (pass.m, pass.width(t));
        let p = pass.covariance(t);
        // Smoothed state, mean and white columns: A + P r.
        let smoothed = &mut self.smoothed[..width];
        smoothed.copy_from_slice(pass.state_columns(t, column));
        basis.whiten(smoothed);
        for (i, r) in r.chunks_exact(width).enumerate() {
            let weight = p[packed_at(i, column)];
            for (to, from) in smoothed.iter_mut().zip(r) {
                *to += weight * *from;
            }
        }
        let product = along(smoothed, &self.r_after[row * width..(row + 1) * width]);
        // (N_t T P_{t|t})[row, column] with P_{t|t} = P - K (F K)'.
        for (j, to) in self.vector.iter_mut().enumerate() {
            *to = self.n_after[packed_at(row, j)];
        }
        dynamics.backward(&mut self.vector, 1, &mut self.spare);
        let (mut cross, mut with_gain) = (V::zero(), V::zero());
        let gain = pass.gain(t);
        for i in 0..m {
            cross += self.vector[i] * p[packed_at(i, column)];
            with_gain += self.vector[i] * gain[i];
        }
        product - (cross - with_gain * gain[column] * pass.f[t])
    }
}

/// Sum of the products of two rows.
#[inline(always)]
fn along<V: Real>(a: &[V], b: &[V]) -> V {
    let mut sum = V::zero();
    for (x, y) in a.iter().zip(b) {
        sum += *x * *y;
    }
    sum
}
