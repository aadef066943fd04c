//! The response of the model to a parameter of `T` or of a proper start.

use crate::buffer::refill;
use crate::data::Data;
use crate::derivatives::Derivative;
use crate::dynamics::Dynamics;
use crate::filter::Pass;
use crate::lanes::Real;
use crate::score::Paths;

/// Buffers.
#[derive(Debug, Clone, Default)]
pub(super) struct Shapes<V> {
    /// `(n + 1) x m`: derivative of `r_t`; row 0 is the start's.
    dr: Vec<V>,
    x: Vec<V>,
    dx: Vec<V>,
}

impl<V: Real> Shapes<V> {
    /// Writes `q = V_i u` of one parameter, one number every `stride` of `out`.
    #[inline(always)]
    pub(super) fn respond(
        &mut self,
        derivative: &Derivative<V>,
        dynamics: &Dynamics<V>,
        data: &Data<V>,
        pass: &Pass<V>,
        (paths, spare): (&Paths<V>, &mut [V]),
        (out, stride): (&mut [V], usize),
    ) {
        let (n, m) = (pass.n, pass.m);
        let through_transition = !derivative.transition.is_empty();
        let Self { dr, x, dx } = self;
        refill(x, m);
        refill(dx, m);
        for &(i, j, value) in &derivative.start {
            dx[i] += value * paths.r_first[j];
        }
        if through_transition {
            // dr_{t-1} = T' dr_t + dT' r_t; row t + 1 of `dr` holds dr_t.
            refill(dr, (n + 1) * m);
            for t in (0..n).rev() {
                let (before, after) = dr.split_at_mut((t + 1) * m);
                let row = &mut before[t * m..];
                row.copy_from_slice(&after[..m]);
                dynamics.backward(row, 1, spare);
                for &(i, j, value) in &derivative.transition {
                    row[j] += value * paths.r[t * m + i];
                }
            }
            for start in &dynamics.proper {
                for i in 0..start.size {
                    for j in 0..start.size {
                        let c = start.covariance[i * start.size + j];
                        x[start.offset + i] += c * paths.r_first[start.offset + j];
                        dx[start.offset + i] += c * dr[start.offset + j];
                    }
                }
            }
        }
        for (t, q) in out.iter_mut().step_by(stride).enumerate().take(n) {
            let mut signal = V::zero();
            for (state, load) in dynamics.loads(&data.drifting, t) {
                signal += load * dx[state];
            }
            *q = signal;
            dynamics.forward(dx, 1, spare);
            if through_transition {
                for &(i, j, value) in &derivative.transition {
                    dx[i] += value * x[j];
                }
                dynamics.forward(x, 1, spare);
                dynamics.add_disturbance(x, &paths.r[t * m..(t + 1) * m]);
                dynamics.add_disturbance(dx, &dr[(t + 1) * m..(t + 2) * m]);
            }
            for &state in &derivative.states {
                dx[state] += paths.r[t * m + state];
            }
        }
    }
}
