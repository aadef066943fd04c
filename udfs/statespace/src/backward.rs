//! The backward pass over filtered series: the smoothing cumulants `r_t` and `N_t` (de Jong 1989, *JASA* 84;
//! DK 4.4-4.5, 5.3), with a column for each diffuse element.
//!
//! Everything is linear in the diffuse elements, so the pass works in the basis in which their posterior covariance is I. There
//! the correction of any variance is a plain sum of squares over the columns, and the mean path is a column of its own.
//!
//! Where gain and `F` do not change, `N` settles as `P` does in the filter, and is frozen in the same way.

mod crossing;

use crate::buffer::refill;
use crate::data::Data;
use crate::dynamics::{Dynamics, packed_at, packed_len, times_vector};
use crate::filter::{Pass, unchanged};
use crate::lanes::{Mask, Real};
use crossing::Crossing;

/// What happens at each point, from the last to the first.
pub(crate) trait Visitor<V> {
    /// The state's disturbance between `t` and `t + 1`: `r` is `m` rows of mean path and white columns, `n` is
    /// packed. Its mean is `Q r`, its variance `Q - Q (n - r_w r_w') Q`.
    fn disturbance(&mut self, t: usize, r: &[V], n: &[V]);
    /// The irregular at `t`: `u` is mean path and white columns, `weight` the cumulant's variance; all zero where missing. Mean `h u`,
    /// variance `h - h^2 (weight - u_w u_w')`.
    fn irregular(&mut self, t: usize, u: &[V], weight: V);
    /// The state at `t`: `r` and `n` after the point has been taken in (`r_{t-1}`, `N_{t-1}`).
    fn state(&mut self, t: usize, r: &[V], n: &[V], basis: &Basis<'_, V>);
}

/// The white basis at a point.
pub(crate) struct Basis<'a, V> {
    pass: &'a Pass<V>,
    crossing: &'a Crossing<V>,
    t: usize,
}

impl<V: Real> Basis<'_, V> {
    /// Rewrites raw columns (of the predicted state, say) as mean path and white columns.
    #[inline(always)]
    pub(crate) fn whiten(&self, row: &mut [V]) {
        self.pass.reduction.whiten(row);
        self.cross(row);
    }

    /// Writes the kept row of the point as mean path and white columns.
    #[inline(always)]
    pub(crate) fn row(&self, out: &mut [V]) {
        out.copy_from_slice(self.pass.row(self.t));
        self.cross(out);
    }

    #[inline(always)]
    fn cross(&self, row: &mut [V]) {
        if self.t < self.pass.narrow_from {
            let lanes = self.pass.before_collapse(self.t);
            if !lanes.is_none() {
                self.crossing.apply(row, lanes);
            }
        }
    }
}

/// Buffers of the pass.
#[derive(Debug, Clone, Default)]
pub(crate) struct Cumulants<V> {
    r: Vec<V>,
    n: Vec<V>,
    other: Vec<V>,
    u: Vec<V>,
    kn: Vec<V>,
    /// Packed: what `N` was a step ago.
    before: Vec<V>,
    spare: Vec<V>,
    crossing: Crossing<V>,
}

impl<V: Real> Cumulants<V> {
    /// Final cumulants `r_0` (`m` rows) and `N_0` (packed) after a pass.
    pub(crate) fn first(&self) -> (&[V], &[V]) {
        (&self.r, &self.n)
    }
}

/// Runs backward. `pass` must have kept its gains and had its rows whitened.
///
/// Returns the lanes in which the collapse cannot be undone without loss (their results mean nothing): the caller filters again with
/// [`Pass::keep_open`].
#[inline(always)]
pub(crate) fn run<V: Real>(
    dynamics: &Dynamics<V>,
    data: &Data<V>,
    pass: &Pass<V>,
    cumulants: &mut Cumulants<V>,
    visitor: &mut impl Visitor<V>,
) -> Mask {
    let m = pass.m;
    let mut width = pass.width(pass.n);
    cumulants.crossing.reset(pass);
    for (buffer, len) in [
        (&mut cumulants.r, m * width),
        (&mut cumulants.n, packed_len(m)),
        (&mut cumulants.other, packed_len(m)),
        (&mut cumulants.before, packed_len(m)),
        (&mut cumulants.u, 1 + pass.elements),
        (&mut cumulants.kn, m),
        (&mut cumulants.spare, dynamics.spare_len()),
    ] {
        refill(buffer, len);
    }
    let mut singular = Mask::NONE;
    let mut settled = Mask::NONE;
    let (mut weight, mut previous_weight) = (V::zero(), V::zero());
    for t in (0..pass.n).rev() {
        let collapsing = pass.collapsing(t + 1);
        if !collapsing.is_none() {
            let Cumulants { r, n, crossing, .. } = &mut *cumulants;
            singular |= crossing.cross(pass, collapsing, r, n);
            width = pass.width(t);
            settled &= !collapsing;
        }
        let Cumulants { r, n, other, u, kn, before, spare, crossing } = &mut *cumulants;
        let basis = Basis { pass, crossing, t };
        visitor.disturbance(t, r, n);
        dynamics.backward(r, width, spare);
        // Lanes at rest before their end change nothing: nothing has come in yet.
        let ended = !data.alive(t);
        // The gain here is the gain of the step before (t + 1), so that N may be what it was.
        let same = pass.steady[t] & if t + 1 < pass.n { pass.steady[t + 1] } else { Mask::NONE };
        settled &= same;
        let at_rest = (settled | ended).is_all::<V>();
        let gain = pass.gain(t);
        let inverse = pass.inverse[t];
        let u = &mut u[..width];
        basis.row(u);
        for x in u.iter_mut() {
            *x *= inverse;
        }
        for (k, columns) in gain.iter().zip(r.chunks_exact(width)) {
            for (to, from) in u.iter_mut().zip(columns) {
                *to -= *k * *from;
            }
        }
        if !at_rest {
            // What N was: the frozen lanes go on with it, the others are compared with it.
            let keep = !(same | settled).is_none();
            if keep {
                before.copy_from_slice(n);
            }
            dynamics.pull_back(n, other, spare);
            times_vector(n, gain, kn);
            weight = inverse;
            for (k, v) in gain.iter().zip(kn.iter()) {
                weight += *k * *v;
            }
            // N <- N - z kn' - kn z' + weight z z'
            for (i, a) in dynamics.loads(&data.drifting, t) {
                for (j, v) in kn.iter().enumerate() {
                    n[packed_at(i, j)] -= a * *v;
                }
                n[packed_at(i, i)] -= a * kn[i];
                for (j, b) in dynamics.loads(&data.drifting, t) {
                    if j <= i {
                        n[packed_at(i, j)] += weight * (a * b);
                    }
                }
            }
            if keep {
                let close = same
                    & !settled
                    & !(weight - previous_weight).abs().above(weight.times(4.0 * f64::EPSILON));
                if !close.is_none() {
                    settled |= unchanged(before, n, m, close);
                }
                if !settled.is_none() {
                    for (to, from) in n.iter_mut().zip(before.iter()) {
                        *to = V::select(settled, *from, *to);
                    }
                }
            }
            previous_weight = weight;
        }
        visitor.irregular(t, u, weight);
        for (state, load) in dynamics.loads(&data.drifting, t) {
            for (to, from) in r[state * width..(state + 1) * width].iter_mut().zip(u.iter()) {
                *to += load * *from;
            }
        }
        visitor.state(t, r, n, &basis);
    }
    singular
}
