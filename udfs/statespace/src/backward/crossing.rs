//! The way back across the collapse.
//!
//! Where the filter took the diffuse states into its state, `P = P_a + B B'`, with `e ~ N(0, I)` their
//! white form given the points before. Backward from there `e | y ~ N(B' r, M)`, `M = I - B' N B = L L'`, and the cumulants
//! given `e` are `r - N B L^-T w` and `N + C C'` with `C = -N B L^-T`, `w ~ N(0, I)` (Woodbury on `N = (J^-1 + P)^-1`, J the
//! information of the points to come). So `C` are the columns with which the pass goes on.

use crate::buffer::refill;
use crate::dynamics::packed_at;
use crate::filter::Pass;
use crate::lanes::{Mask, Real};

/// Smallest squared pivot of `M` at which the way back across the collapse keeps its digits.
const SINGULAR: f64 = 1e-6;

/// Posterior of the collapsed elements' white form: `e = mean + along w_2 + L w_1`.
#[derive(Debug, Clone, Default)]
pub(super) struct Crossing<V> {
    states: usize,
    mean: Vec<V>,
    /// `states x drivers`.
    along: Vec<V>,
    /// `states x states`, lower.
    lower: Vec<V>,
    /// `m x states`.
    nb: Vec<V>,
}

impl<V: Real> Crossing<V> {
    #[inline(always)]
    pub(super) fn reset(&mut self, pass: &Pass<V>) {
        let (m, k) = (pass.m, pass.states);
        let drivers = pass.elements - k;
        self.states = k;
        refill(&mut self.mean, k);
        refill(&mut self.along, k * drivers);
        refill(&mut self.lower, k * k);
        refill(&mut self.nb, m * k);
    }

    /// `[mean, e, w_2]` into `[mean, w_1, w_2]`, in place, in these lanes.
    #[inline(always)]
    pub(super) fn apply(&self, row: &mut [V], lanes: Mask) {
        let k = self.states;
        let (head, others) = row.split_at_mut(1 + k);
        let drivers = others.len();
        for i in 0..k {
            let x = V::select(lanes, head[1 + i], V::zero());
            head[0] += x * self.mean[i];
            for (to, from) in others.iter_mut().zip(&self.along[i * drivers..(i + 1) * drivers]) {
                *to += x * *from;
            }
        }
        // x L with L lower: column j needs elements j.. only, so it can be overwritten in order.
        for j in 0..k {
            let mut sum = head[1 + j] * self.lower[j * k + j];
            for i in j + 1..k {
                sum += head[1 + i] * self.lower[i * k + j];
            }
            head[1 + j] = V::select(lanes, sum, head[1 + j]);
        }
    }

    /// Takes the cumulants back across the collapse of these lanes; returns those in which that loses too many digits. `r` gets the
    /// columns of the diffuse states back if it lacks them.
    #[inline(always)]
    pub(super) fn cross(&mut self, pass: &Pass<V>, lanes: Mask, r: &mut Vec<V>, n: &mut [V]) -> Mask {
        let (m, k) = (pass.m, self.states);
        let drivers = pass.elements - k;
        let wide = 1 + pass.elements;
        if r.len() < m * wide {
            widen(r, m, k, drivers);
        }
        let b = &pass.bridge;
        let Self { nb, mean, along, lower, .. } = self;
        nb.fill(V::zero());
        for i in 0..m {
            for j in 0..m {
                let weight = n[packed_at(i, j)];
                for (to, from) in nb[i * k..(i + 1) * k].iter_mut().zip(&b[j * k..(j + 1) * k]) {
                    *to += weight * *from;
                }
            }
        }
        for c in 0..k {
            let mut sum = V::zero();
            for i in 0..m {
                sum += b[i * k + c] * r[i * wide];
            }
            mean[c] = V::select(lanes, sum, mean[c]);
            for d in 0..drivers {
                let mut sum = V::zero();
                for i in 0..m {
                    sum += b[i * k + c] * r[i * wide + 1 + k + d];
                }
                let to = &mut along[c * drivers + d];
                *to = V::select(lanes, sum, *to);
            }
        }
        // Cholesky of M = I - B' N B.
        let mut singular = Mask::NONE;
        for i in 0..k {
            for j in 0..=i {
                let mut rest = if i == j { V::splat(1.0) } else { V::zero() };
                for s in 0..m {
                    rest -= b[s * k + i] * nb[s * k + j];
                }
                for c in 0..j {
                    rest -= lower[i * k + c] * lower[j * k + c];
                }
                let element = if i == j {
                    let sound = rest.above(V::splat(SINGULAR));
                    singular |= lanes & !sound;
                    V::select(sound, rest, V::splat(1.0)).sqrt()
                } else {
                    rest / lower[j * k + j]
                };
                // A lane that has crossed before, or has yet to, keeps its own; the diagonal is never zero then.
                let to = &mut lower[i * k + j];
                *to = V::select(lanes, element, if i == j { one_where_zero(*to) } else { *to });
            }
        }
        // C = -N B L^-T, row by row.
        for row in nb.chunks_exact_mut(k) {
            for j in 0..k {
                let mut rest = -row[j];
                for c in 0..j {
                    rest -= row[c] * lower[j * k + c];
                }
                row[j] = rest / lower[j * k + j];
            }
        }
        for i in 0..m {
            for j in 0..=i {
                let mut sum = V::zero();
                for c in 0..k {
                    sum += nb[i * k + c] * nb[j * k + c];
                }
                n[packed_at(i, j)] += V::select(lanes, sum, V::zero());
            }
            for c in 0..k {
                let to = &mut r[i * wide + 1 + c];
                *to = V::select(lanes, nb[i * k + c], *to);
            }
        }
        singular
    }
}

/// Makes room for the columns of the diffuse states behind the mean, zeros in all lanes.
fn widen<V: Real>(r: &mut Vec<V>, m: usize, states: usize, drivers: usize) {
    let (narrow, wide) = (1 + drivers, 1 + drivers + states);
    r.resize(m * wide, V::zero());
    for i in (0..m).rev() {
        r.copy_within(i * narrow + 1..(i + 1) * narrow, i * wide + 1 + states);
        r[i * wide] = r[i * narrow];
        r[i * wide + 1..][..states].fill(V::zero());
    }
}

#[inline(always)]
fn one_where_zero<V: Real>(x: V) -> V {
    let magnitude = x.abs();
    V::select(magnitude.above(V::zero()), x, V::splat(1.0))
}
