//! The collapse: the filter runs on with fewer columns once the data have told it where the diffuse states are.
//!
//! When the rows tell the diffuse states well apart, their columns move into the state: `a` takes their estimate and `P` their posterior
//! covariance, and the ordinary filter goes on (de Jong 1991, section 5; DK 5.7.3). What each unit of that posterior moves is kept in
//! [`Pass::bridge`], over which `backward` finds the way back. The columns of constant drivers stay open to the end, so that a driver
//! that starts late needs no special case.
//!
//! Every lane collapses by its own data. Its columns are zero from then on, and are taken out of memory when the last lane has collapsed.

use super::Pass;
use crate::data::Data;
use crate::dynamics::packed_at;
use crate::lanes::{Mask, Real};

/// Steps that must be left for a collapse to pay.
const WORTHWHILE: usize = 16;

impl<V: Real> Pass<V> {
    /// Lanes to collapse after point `t`: the rows tell the diffuse states apart, and narrower columns pay.
    #[inline(always)]
    pub(super) fn may_collapse(&self, t: usize, data: &Data<V>) -> Mask {
        // With more drivers than diffuse states little is saved, and one QR of everything keeps the most digits.
        if self.states == 0 || 2 * self.states < self.elements {
            return Mask::NONE;
        }
        let worthwhile =
            self.live & data.alive(t + WORTHWHILE) & !self.keep_open & !self.reduction.eliminated();
        if worthwhile.is_none() { worthwhile } else { self.reduction.ready(worthwhile) }
    }

    /// Moves the first columns into the predicted state of point `at` in these lanes. True when no lane has them any more.
    #[inline(always)]
    pub(super) fn collapse(&mut self, at: usize, lanes: Mask) -> bool {
        let (m, states, width) = (self.m, self.states, self.elements + 1);
        for lane in lanes.lanes() {
            self.collapsed_at[lane] = at;
        }
        self.collapses[at] |= lanes;
        let everywhere = self.reduction.eliminate(lanes);
        for i in 0..m {
            let row = &mut self.row[..width];
            let columns = &mut self.a[i * width..(i + 1) * width];
            row.copy_from_slice(columns);
            self.reduction.condition(row);
            let bridge = &mut self.bridge[i * states..(i + 1) * states];
            for (to, from) in bridge.iter_mut().zip(&row[1..=states]) {
                *to = V::select(lanes, *from, *to);
            }
            row[1..=states].fill(V::zero());
            for (to, from) in columns.iter_mut().zip(row.iter()) {
                *to = V::select(lanes, *from, *to);
            }
        }
        for i in 0..m {
            for j in 0..=i {
                let (x, y) = (&self.bridge[i * states..][..states], &self.bridge[j * states..][..states]);
                let mut c = V::zero();
                for (a, b) in x.iter().zip(y) {
                    c += *a * *b;
                }
                self.p[packed_at(i, j)] += V::select(lanes, c, V::zero());
            }
        }
        if everywhere {
            self.narrow_from = at;
            let narrow = width - states;
            for i in 0..m {
                self.a[i * narrow] = self.a[i * width];
                self.a.copy_within(i * width + 1 + states..(i + 1) * width, i * narrow + 1);
            }
            self.a.truncate(m * narrow);
        }
        everywhere
    }
}
