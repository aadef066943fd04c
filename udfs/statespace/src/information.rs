//! The average information: the curvature that goes with the score.
//!
//! Gilmour, Thompson & Cullis (1995), *Biometrics* 51, 1440-1450: for a Gaussian likelihood with covariance `V(theta)` and its
//! projection `P` off the diffuse elements, the average of observed and expected information is
//! `AI_ij = 1/2 q_i' P q_j` with `q_i = V_i P y`, the terms in second derivatives of `V` left out.
//!
//! `P y` is the path `u` of the smoothing pass. `q_i` is the model's response to it: for a variance, the signal
//! driven by the cumulants `r_t` of its states; for a parameter of `T`, the derivative of the two recursions
//! `r_{t-1} = T' r_t + Z' u_t` and `x_{t+1} = T x_t + Q r_t` that make up `V u`. `P q_j` is one vector pass of filter and
//! smoother with the gains at hand, for all parameters at once. No covariance recursion is run again.

mod shapes;

use std::ops::Range;

use crate::buffer::refill;
use crate::data::Data;
use crate::derivatives::Derivative;
use crate::dynamics::Dynamics;
use crate::filter::Pass;
use crate::lanes::Real;
use crate::score::Paths;
use shapes::Shapes;

/// Average information of each lane's series and its buffers.
#[derive(Debug, Clone, Default)]
pub(crate) struct Information<V> {
    /// `p x p` row-major, natural units.
    pub(crate) matrix: Vec<V>,
    /// `n x p`: the responses `q_i`.
    responses: Vec<V>,
    /// `n x p`: the projected responses.
    projected: Vec<V>,
    /// `m x p`.
    x: Vec<V>,
    /// `elements x p`.
    white: Vec<V>,
    /// `p`.
    v: Vec<V>,
    /// Columns of `x` that are not zero in each block of states.
    columns: Vec<Range<usize>>,
    spare: Vec<V>,
    shapes: Shapes<V>,
}

impl<V: Real> Information<V> {
    /// Fills the matrix. `pass` must have kept its gains and had its rows whitened.
    #[inline(always)]
    pub(crate) fn compute(
        &mut self,
        derivatives: &[Derivative<V>],
        dynamics: &Dynamics<V>,
        data: &Data<V>,
        pass: &Pass<V>,
        paths: &Paths<V>,
    ) {
        let (n, m, p) = (pass.n, pass.m, derivatives.len());
        refill(&mut self.matrix, p * p);
        refill(&mut self.x, m * p);
        refill(&mut self.white, pass.elements * p);
        refill(&mut self.v, p);
        refill(&mut self.spare, dynamics.spare_len());
        self.responses.resize(n * p, V::zero());
        self.projected.resize(n * p, V::zero());
        self.columns.clear();
        self.columns.extend(dynamics.extents().map(|states| touching(derivatives, states)));
        self.respond(derivatives, dynamics, data, pass, paths);
        for (index, derivative) in derivatives.iter().enumerate() {
            if !(derivative.transition.is_empty() && derivative.start.is_empty()) {
                let out = &mut self.responses[index..];
                self.shapes.respond(derivative, dynamics, data, pass, (paths, &mut self.spare), (out, p));
            }
        }
        self.project_forward(dynamics, data, pass, p);
        self.project_backward(dynamics, data, pass, p);
        for (q, projected) in self.responses.chunks_exact(p).zip(self.projected.chunks_exact(p)).take(n) {
            for i in 0..p {
                for j in 0..=i {
                    self.matrix[i * p + j] += q[j] * projected[i];
                }
            }
        }
        for i in 0..p {
            for j in 0..=i {
                let value = self.matrix[i * p + j].times(0.5);
                self.matrix[i * p + j] = value;
                self.matrix[j * p + i] = value;
            }
        }
    }

    /// Writes `q_i = V_i u` of the variances into `responses`.
    #[inline(always)]
    fn respond(
        &mut self,
        derivatives: &[Derivative<V>],
        dynamics: &Dynamics<V>,
        data: &Data<V>,
        pass: &Pass<V>,
        paths: &Paths<V>,
    ) {
        let (m, p) = (pass.m, derivatives.len());
        let Self { responses, x, spare, columns, .. } = self;
        for (t, q) in responses.chunks_exact_mut(p).enumerate().take(pass.n) {
            q.fill(V::zero());
            for (state, load) in dynamics.loads(&data.drifting, t) {
                for (q, x) in q.iter_mut().zip(&x[state * p..(state + 1) * p]) {
                    *q += load * *x;
                }
            }
            dynamics.forward_columns(x, p, columns, spare);
            let r = &paths.r[t * m..(t + 1) * m];
            for (index, derivative) in derivatives.iter().enumerate() {
                if derivative.irregular {
                    q[index] = paths.u[t];
                }
                for &state in &derivative.states {
                    x[state * p + index] += r[state];
                }
                if !derivative.loads.is_empty() {
                    let mut along = V::zero();
                    for &(state, load) in &derivative.loads {
                        along += r[state].times(load);
                    }
                    for &(state, load) in &derivative.loads {
                        x[state * p + index] += along.times(load);
                    }
                }
            }
        }
    }

    /// Filters the responses with the gains at hand and regresses the innovations on the elements: `white`, first the elements that
    /// collapse, then those that stay open (all of them without a collapse). Across the collapse the elements go into the state with their
    /// estimate from the response itself.
    #[inline(always)]
    fn project_forward(&mut self, dynamics: &Dynamics<V>, data: &Data<V>, pass: &Pass<V>, p: usize) {
        let states = pass.states;
        let Self { responses, projected, x, white, v, spare, .. } = self;
        x.fill(V::zero());
        for t in 0..pass.n {
            let collapsing = pass.collapsing(t);
            if !collapsing.is_none() {
                for (x, bridge) in x.chunks_exact_mut(p).zip(pass.bridge.chunks_exact(states)) {
                    for (white, b) in white.chunks_exact(p).zip(bridge) {
                        let b = V::select(collapsing, *b, V::zero());
                        for (x, w) in x.iter_mut().zip(white) {
                            *x -= b * *w;
                        }
                    }
                }
            }
            v.copy_from_slice(&responses[t * p..(t + 1) * p]);
            for (state, load) in dynamics.loads(&data.drifting, t) {
                for (v, x) in v.iter_mut().zip(&x[state * p..(state + 1) * p]) {
                    *v -= load * *x;
                }
            }
            for (x, gain) in x.chunks_exact_mut(p).zip(pass.gain(t)) {
                for (x, v) in x.iter_mut().zip(v.iter()) {
                    *x += *gain * *v;
                }
            }
            let inverse = pass.inverse[t];
            let columns = &pass.row(t)[1..];
            let open = pass.elements - columns.len();
            for (white, c) in white[open * p..].chunks_exact_mut(p).zip(columns) {
                let c = *c * inverse;
                for (w, v) in white.iter_mut().zip(v.iter()) {
                    *w += c * *v;
                }
            }
            projected[t * p..(t + 1) * p].copy_from_slice(v);
            dynamics.forward(x, p, spare);
        }
    }

    /// Smooths what [`Self::project_forward`] left in `projected`, the elements' share taken out.
    #[inline(always)]
    fn project_backward(&mut self, dynamics: &Dynamics<V>, data: &Data<V>, pass: &Pass<V>, p: usize) {
        let states = pass.states;
        let Self { projected, x, white, spare, .. } = self;
        x.fill(V::zero());
        for t in (0..pass.n).rev() {
            let collapsing = pass.collapsing(t + 1);
            if !collapsing.is_none() {
                // What the points to come add to the collapsed elements' estimate.
                for (x, bridge) in x.chunks_exact(p).zip(pass.bridge.chunks_exact(states)) {
                    for (white, b) in white.chunks_exact_mut(p).zip(bridge) {
                        let b = V::select(collapsing, *b, V::zero());
                        for (w, x) in white.iter_mut().zip(x) {
                            *w -= b * *x;
                        }
                    }
                }
            }
            dynamics.backward(x, p, spare);
            let inverse = pass.inverse[t];
            let columns = &pass.row(t)[1..];
            let open = pass.elements - columns.len();
            let u = &mut projected[t * p..(t + 1) * p];
            for (white, c) in white[open * p..].chunks_exact(p).zip(columns) {
                for (u, w) in u.iter_mut().zip(white) {
                    *u -= *c * *w;
                }
            }
            for u in u.iter_mut() {
                *u *= inverse;
            }
            for (x, gain) in x.chunks_exact(p).zip(pass.gain(t)) {
                for (u, x) in u.iter_mut().zip(x) {
                    *u -= *gain * *x;
                }
            }
            for (state, load) in dynamics.loads(&data.drifting, t) {
                for (x, u) in x[state * p..(state + 1) * p].iter_mut().zip(u.iter()) {
                    *x += load * *u;
                }
            }
        }
    }
}

/// The parameters, from the first to the last, that disturb some of these states.
fn touching<V: Real>(derivatives: &[Derivative<V>], states: Range<usize>) -> Range<usize> {
    let touches = |d: &Derivative<V>| {
        d.states.iter().chain(d.loads.iter().map(|(state, _)| state)).any(|state| states.contains(state))
    };
    let first = derivatives.iter().position(touches).unwrap_or(0);
    first..derivatives.iter().rposition(touches).map_or(0, |last| last + 1)
}
