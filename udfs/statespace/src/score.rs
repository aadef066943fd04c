//! The score (gradient of the log-likelihood) from one smoothing pass.
//!
//! Koopman & Shephard (1992), *Biometrika* 79, 823-826; DK 7.3.3. For a variance that disturbs states S the score is
//! `1/2 sum_t sum_S (r_t^2 - N_t)`, for the irregular `1/2 sum_t (u_t^2 - D_t)`. For a parameter of `T` Fisher's identity gives
//! `sum_t tr(dT' E[Q^-1 n_t a_t'])` with `E[Q^-1 n_t a_t' | y] = r_t a_t' - N_t T P_{t|t}`, which needs no inverse of Q and so
//! holds at zero variances. A proper start adds `1/2 tr(dP_1 (r_0 r_0' - N_0))`. The white columns of the
//! diffuse elements correct each second moment.

use crate::backward::{self, Basis, Cumulants, NearlySingular, Visitor};
use crate::buffer::refill;
use crate::filter::{Data, Pass};
use crate::structure::Model;
use crate::system::System;

/// Mean paths of the smoothing pass; the average information is built on them.
#[derive(Debug, Clone, Default)]
pub(crate) struct Paths {
    /// `n x m`: `r_t`, the cumulant of the disturbance between `t` and `t + 1`.
    pub(crate) r: Vec<f64>,
    /// `n`: `u_t`, the cumulant of the irregular; zero where missing.
    pub(crate) u: Vec<f64>,
    /// `m`: `r_0`, the cumulant of the start.
    pub(crate) r_first: Vec<f64>,
}

/// Score of one series and its buffers.
#[derive(Debug, Clone, Default)]
pub(crate) struct Score {
    /// Derivative of the log-likelihood in each parameter, natural units.
    pub(crate) gradient: Vec<f64>,
    pub(crate) paths: Paths,
    moments: Moments,
    cumulants: Cumulants,
}

/// Sums over time and copies of the step before, reused from pass to pass.
#[derive(Debug, Clone, Default)]
struct Moments {
    irregular: f64,
    /// Per state: `1/2 sum (r^2 - N)`.
    per_state: Vec<f64>,
    /// Per parameter: the same along the loads of a shared disturbance.
    shared: Vec<f64>,
    /// Per parameter: the part that comes through `T`.
    through_transition: Vec<f64>,
    r_after: Vec<f64>,
    n_after: Vec<f64>,
    smoothed: Vec<f64>,
    vector: Vec<f64>,
}

impl Score {
    /// Runs the smoothing pass over `pass`, which must have kept gains (and everything, if the model has parameters
    /// that are not variances) and had its rows whitened.
    ///
    /// # Errors
    /// As [`backward::run`].
    pub(crate) fn compute(
        &mut self,
        model: &Model,
        system: &System,
        data: Data<'_>,
        pass: &Pass,
    ) -> Result<(), NearlySingular> {
        let (n, m, width) = (pass.n, pass.m, pass.elements + 1);
        refill(&mut self.paths.r, n * m);
        refill(&mut self.paths.u, n);
        let moments = &mut self.moments;
        moments.irregular = 0.0;
        refill(&mut moments.per_state, m);
        refill(&mut moments.shared, model.effects.len());
        refill(&mut moments.through_transition, model.effects.len());
        refill(&mut moments.r_after, m * width);
        refill(&mut moments.n_after, m * m);
        refill(&mut moments.smoothed, width);
        refill(&mut moments.vector, m);
        let mut collect = Collect {
            system,
            pass,
            model,
            shapes: model.has_shapes(),
            paths: &mut self.paths,
            moments: &mut self.moments,
        };
        backward::run(system, data, pass, &mut self.cumulants, &mut collect)?;
        let (r, n0) = self.cumulants.first();
        let width = pass.width(0);
        self.paths.r_first.clear();
        self.paths.r_first.extend(r.iter().step_by(width));
        self.gradient.clear();
        for (index, effect) in model.effects.iter().enumerate() {
            let mut g = self.moments.through_transition[index] + self.moments.shared[index];
            if effect.irregular {
                g += self.moments.irregular;
            }
            for &state in &effect.states {
                g += self.moments.per_state[state];
            }
            for &(i, j, value) in &effect.start {
                let (a, b) = (&r[i * width..(i + 1) * width], &r[j * width..(j + 1) * width]);
                let product: f64 = a.iter().zip(b).map(|(x, y)| x * y).sum();
                g += 0.5 * value * (product - n0[i * m + j]);
            }
            self.gradient.push(g);
        }
        Ok(())
    }
}

struct Collect<'a> {
    system: &'a System,
    pass: &'a Pass,
    model: &'a Model,
    shapes: bool,
    paths: &'a mut Paths,
    moments: &'a mut Moments,
}

impl Visitor for Collect<'_> {
    fn disturbance(&mut self, t: usize, r: &[f64], n: &[f64]) {
        let m = self.pass.m;
        let width = r.len() / m.max(1);
        for (i, state) in self.model.state_specs().iter().enumerate() {
            let row = &r[i * width..(i + 1) * width];
            self.paths.r[t * m + i] = row[0];
            if state.variance.is_some() {
                let squares: f64 = row.iter().map(|v| v * v).sum();
                self.moments.per_state[i] += 0.5 * (squares - n[i * m + i]);
            }
        }
        for (index, effect) in self.model.effects.iter().enumerate().filter(|(_, e)| !e.loads.is_empty()) {
            let mut spread = 0.0;
            for &(i, a) in &effect.loads {
                spread += effect.loads.iter().map(|&(j, b)| a * b * n[i * m + j]).sum::<f64>();
            }
            let along = (0..width)
                .map(|c| effect.loads.iter().map(|&(i, a)| a * r[i * width + c]).sum::<f64>().powi(2))
                .sum::<f64>();
            self.moments.shared[index] += 0.5 * (along - spread);
        }
        if self.shapes {
            self.moments.r_after[..r.len()].copy_from_slice(r);
            self.moments.n_after.copy_from_slice(n);
        }
    }

    fn irregular(&mut self, t: usize, u: &[f64], weight: f64) {
        self.paths.u[t] = u[0];
        let squares: f64 = u.iter().map(|v| v * v).sum();
        self.moments.irregular += 0.5 * (squares - weight);
    }

    fn state(&mut self, t: usize, r: &[f64], _n: &[f64], basis: &Basis<'_>) {
        // The transition after the last point reaches no observation.
        if !self.shapes || t + 1 == self.pass.n {
            return;
        }
        for (index, effect) in self.model.effects.iter().enumerate() {
            for &(row, column, value) in &effect.transition {
                let moment = self.moments.of_transition(self.system, self.pass, (t, basis), r, (row, column));
                self.moments.through_transition[index] += value * moment;
            }
        }
    }
}

impl Moments {
    /// `E[(Q^-1 n_t)_row (a_t)_column | y]`; `r` is `r_{t-1}`.
    fn of_transition(
        &mut self,
        system: &System,
        pass: &Pass,
        (t, basis): (usize, &Basis<'_>),
        r: &[f64],
        (row, column): (usize, usize),
    ) -> f64 {
        let (m, width) = (pass.m, pass.width(t));
        let p = &pass.covariances[(t * m + column) * m..(t * m + column + 1) * m];
        // Smoothed state, mean and white columns: A + P r.
        let smoothed = &mut self.smoothed[..width];
        smoothed.copy_from_slice(pass.state_columns(t, column));
        basis.whiten(smoothed);
        for (weight, r) in p.iter().zip(r.chunks_exact(width)) {
            for (to, from) in smoothed.iter_mut().zip(r) {
                *to += weight * from;
            }
        }
        let r_after = &self.r_after[row * width..(row + 1) * width];
        let product: f64 = smoothed.iter().zip(r_after).map(|(a, b)| a * b).sum();
        // (N_t T P_{t|t})[row, column] with P_{t|t} = P - K (F K)'.
        self.vector.copy_from_slice(&self.n_after[row * m..(row + 1) * m]);
        system.backward(&mut self.vector, 1);
        let mut cross: f64 = self.vector.iter().zip(p).map(|(a, b)| a * b).sum();
        let f = pass.f[t];
        if !f.is_nan() {
            let gain = &pass.gains[t * m..(t + 1) * m];
            let along: f64 = self.vector.iter().zip(gain).map(|(a, b)| a * b).sum();
            cross -= along * gain[column] * f;
        }
        product - cross
    }
}
