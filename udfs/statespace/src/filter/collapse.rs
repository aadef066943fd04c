//! The collapse: the filter runs on with fewer columns once the data have told it where the diffuse states are.
//!
//! When the rows tell the diffuse states well apart, their columns move into the state: `a` takes their estimate and `P` their posterior
//! covariance, and the ordinary filter goes on (de Jong 1991, section 5; DK 5.7.3). What each unit of that posterior moves is kept in
//! [`Pass::bridge`], over which `backward` finds the way back. The columns of constant drivers stay open to the end, so that a driver
//! that starts late needs no special case.

use super::Pass;

/// Steps that must be left for a collapse to pay.
const WORTHWHILE: usize = 16;

impl Pass {
    /// Whether to collapse after point `t`: the rows tell the `states` diffuse states apart, and narrower columns pay.
    pub(super) fn may_collapse(&self, t: usize, states: usize) -> bool {
        // With more drivers than diffuse states little is saved, and one QR of everything keeps the most digits.
        let saves = states > 0 && 2 * states >= self.elements && t + WORTHWHILE < self.n;
        saves && !self.keep_open && self.reduction.ready(states)
    }

    /// Moves the first `states` columns into the predicted state of point `at`.
    pub(super) fn collapse(&mut self, at: usize, states: usize) {
        let (m, width) = (self.m, self.elements + 1);
        let narrow = width - states;
        self.collapsed_at = at;
        self.reduction.eliminate(states);
        for i in 0..m {
            let row = &mut self.a[i * width..(i + 1) * width];
            self.reduction.condition(row);
            self.bridge[i * states..(i + 1) * states].copy_from_slice(&row[1..=states]);
            row.copy_within(1 + states.., 1);
            self.a.copy_within(i * width..i * width + narrow, i * narrow);
        }
        self.a.truncate(m * narrow);
        for i in 0..m {
            for j in 0..=i {
                let (x, y) = (&self.bridge[i * states..][..states], &self.bridge[j * states..][..states]);
                let c = x.iter().zip(y).map(|(a, b)| a * b).sum::<f64>();
                self.p[i * m + j] += c;
                if i != j {
                    self.p[j * m + i] += c;
                }
            }
        }
    }
}
