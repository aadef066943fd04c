//! The average information: the curvature that goes with the score.
//!
//! Gilmour, Thompson & Cullis (1995), *Biometrics* 51, 1440-1450: for a Gaussian likelihood with covariance `V(theta)` and its
//! projection `P` off the diffuse elements, the average of observed and expected information is
//! `AI_ij = 1/2 q_i' P q_j` with `q_i = V_i P y`, the terms in second derivatives of `V` left out.
//!
//! `P y` is the path `u` of the smoothing pass. `q_i` is the model's response to it: for a variance, the signal
//! driven by the cumulants `r_t` of its states; for a parameter of `T`, the derivative of the two recursions
//! `r_{t-1} = T' r_t + Z' u_t` and `x_{t+1} = T x_t + Q r_t` that make up `V u`. `P q_j` is one vector pass of filter and
//! smoother with the gains at hand. No covariance recursion is run again.

use crate::buffer::refill;
use crate::filter::{Data, Pass};
use crate::score::Paths;
use crate::structure::{Effect, Model};
use crate::system::System;

/// Average information of one series and its buffers.
#[derive(Debug, Clone, Default)]
pub(crate) struct Information {
    /// `p x p` row-major, natural units.
    pub(crate) matrix: Vec<f64>,
    /// `p x n`: the responses `q_i`.
    responses: Vec<f64>,
    /// `n`: one projected response.
    projected: Vec<f64>,
    /// `n x m`: derivative of `r_t`.
    dr: Vec<f64>,
    x: Vec<f64>,
    dx: Vec<f64>,
    white: Vec<f64>,
}

impl Information {
    /// Fills the matrix. `pass` must have kept its gains and had its rows whitened.
    pub(crate) fn compute(
        &mut self,
        model: &Model,
        system: &System,
        data: Data<'_>,
        pass: &Pass,
        paths: &Paths,
    ) {
        let (n, m, p) = (pass.n, pass.m, model.effects.len());
        refill(&mut self.matrix, p * p);
        refill(&mut self.responses, p * n);
        refill(&mut self.projected, n);
        refill(&mut self.x, m);
        refill(&mut self.dx, m);
        refill(&mut self.white, pass.elements);
        if model.has_shapes() {
            refill(&mut self.dr, (n + 1) * m);
        }
        for (i, effect) in model.effects.iter().enumerate() {
            self.respond(i, effect, system, data, pass, paths);
        }
        for j in 0..p {
            self.project(j, system, data, pass);
            for i in 0..=j {
                let q = &self.responses[i * n..(i + 1) * n];
                let value = 0.5 * q.iter().zip(&self.projected).map(|(a, b)| a * b).sum::<f64>();
                self.matrix[i * p + j] = value;
                self.matrix[j * p + i] = value;
            }
        }
    }

    /// Writes `q_i = V_i u` into `responses`.
    fn respond(
        &mut self,
        index: usize,
        effect: &Effect,
        system: &System,
        data: Data<'_>,
        pass: &Pass,
        paths: &Paths,
    ) {
        let (n, m) = (pass.n, pass.m);
        let out = &mut self.responses[index * n..(index + 1) * n];
        if effect.irregular {
            out.copy_from_slice(&paths.u);
            return;
        }
        let through_transition = !effect.transition.is_empty();
        self.dx.fill(0.0);
        for &(i, j, value) in &effect.start {
            self.dx[i] += value * paths.r_first[j];
        }
        self.x.fill(0.0);
        if through_transition {
            // dr_{t-1} = T' dr_t + dT' r_t; row t + 1 of `dr` holds dr_t, row 0 the start's.
            self.dr[n * m..].fill(0.0);
            for t in (0..n).rev() {
                let (before, after) = self.dr.split_at_mut((t + 1) * m);
                let row = &mut before[t * m..];
                row.copy_from_slice(&after[..m]);
                system.backward(row, 1);
                for &(i, j, value) in &effect.transition {
                    row[j] += value * paths.r[t * m + i];
                }
            }
            for start in &system.proper {
                for i in 0..start.size {
                    for j in 0..start.size {
                        let c = start.covariance[i * start.size + j];
                        self.x[start.offset + i] += c * paths.r_first[start.offset + j];
                        self.dx[start.offset + i] += c * self.dr[start.offset + j];
                    }
                }
            }
        }
        for (t, q) in out.iter_mut().enumerate() {
            let mut signal = 0.0;
            system.for_loads(data.drifting, t, |state, load| signal += load * self.dx[state]);
            *q = signal;
            system.forward(&mut self.dx, 1);
            if through_transition {
                for &(i, j, value) in &effect.transition {
                    self.dx[i] += value * self.x[j];
                }
                system.forward(&mut self.x, 1);
                system.add_disturbance(&mut self.x, &paths.r[t * m..(t + 1) * m]);
                system.add_disturbance(&mut self.dx, &self.dr[(t + 1) * m..(t + 2) * m]);
            }
            for &state in &effect.states {
                self.dx[state] += paths.r[t * m + state];
            }
            if !effect.loads.is_empty() {
                let r = &paths.r[t * m..(t + 1) * m];
                let along: f64 = effect.loads.iter().map(|&(state, load)| load * r[state]).sum();
                for &(state, load) in &effect.loads {
                    self.dx[state] += load * along;
                }
            }
        }
    }

    /// Writes `P q_j` into `projected`: filter and smoother on `q_j` with the gains at hand, the elements' share taken out. Across
    /// the collapse the elements go into the state with their estimate from `q_j` itself.
    fn project(&mut self, index: usize, system: &System, data: Data<'_>, pass: &Pass) {
        let (n, m) = (pass.n, pass.m);
        let states = pass.reduction.eliminated();
        let q = &self.responses[index * n..(index + 1) * n];
        self.x.fill(0.0);
        self.white.fill(0.0);
        // `white`: first the elements that collapse, then those that stay open (all of them without a collapse).
        for t in 0..n {
            if t == pass.collapsed_at {
                for (i, x) in self.x.iter_mut().enumerate() {
                    let moved = pass.bridge[i * states..(i + 1) * states].iter().zip(&self.white);
                    *x -= moved.map(|(b, w)| b * w).sum::<f64>();
                }
            }
            let f = pass.f[t];
            if !f.is_nan() {
                let mut v = q[t];
                system.for_loads(data.drifting, t, |state, load| v -= load * self.x[state]);
                for (x, k) in self.x.iter_mut().zip(&pass.gains[t * m..(t + 1) * m]) {
                    *x += k * v;
                }
                let columns = &pass.row(t)[1..];
                let open = pass.elements - columns.len();
                for (w, c) in self.white[open..].iter_mut().zip(columns) {
                    *w += c * v / f;
                }
                self.projected[t] = v;
            }
            system.forward(&mut self.x, 1);
        }
        self.x.fill(0.0);
        for t in (0..n).rev() {
            if t + 1 == pass.collapsed_at {
                // What the points to come add to the collapsed elements' estimate.
                for (c, w) in self.white[..states].iter_mut().enumerate() {
                    *w -= (0..m).map(|i| pass.bridge[i * states + c] * self.x[i]).sum::<f64>();
                }
            }
            system.backward(&mut self.x, 1);
            let f = pass.f[t];
            if f.is_nan() {
                self.projected[t] = 0.0;
                continue;
            }
            let columns = &pass.row(t)[1..];
            let open = pass.elements - columns.len();
            let fitted: f64 = columns.iter().zip(&self.white[open..]).map(|(c, w)| c * w).sum();
            let gain = &pass.gains[t * m..(t + 1) * m];
            let along: f64 = gain.iter().zip(&self.x).map(|(k, x)| k * x).sum();
            let u = (self.projected[t] - fitted) / f - along;
            self.projected[t] = u;
            system.for_loads(data.drifting, t, |state, load| self.x[state] += load * u);
        }
    }
}
