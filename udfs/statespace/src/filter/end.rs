//! Where a series ends: the filtered state of its last point, from which standing and forecasts go on.

use super::Pass;
use crate::dynamics::packed_at;
use crate::lanes::{Mask, Real};

/// State of the last point given all observations, and the constant drivers' coefficients. Rows of `width` numbers: the mean, then columns
/// in the basis in which the diffuse elements' posterior covariance is I.
#[derive(Debug, Clone, Default)]
pub(crate) struct End {
    pub(crate) width: usize,
    /// `m x width`.
    pub(crate) state: Vec<f64>,
    /// `m x m` row-major: covariance of the states given the elements.
    pub(crate) covariance: Vec<f64>,
    /// `drivers x width`.
    pub(crate) coefficients: Vec<f64>,
}

impl<V: Real> Pass<V> {
    /// Keeps the state of the lanes whose series end at the point in hand.
    #[inline(always)]
    pub(super) fn keep_ends(&mut self, lanes: Mask, width: usize, f: V) {
        self.ends.resize_with(V::LANES, End::default);
        let m = self.m;
        for lane in lanes.lanes() {
            let end = &mut self.ends[lane];
            end.width = width;
            end.state.clear();
            for i in 0..m {
                let gain = self.gain[i].lane(lane);
                let row = self.row[..width].iter().map(|r| gain * r.lane(lane));
                let columns = self.a[i * width..(i + 1) * width].iter();
                end.state.extend(columns.zip(row).map(|(a, moved)| a.lane(lane) + moved));
            }
            end.covariance.clear();
            for i in 0..m {
                for j in 0..m {
                    let taken = self.gain[i].lane(lane) * self.gain[j].lane(lane) * f.lane(lane);
                    end.covariance.push(self.p[packed_at(i, j)].lane(lane) - taken);
                }
            }
        }
    }

    /// The end of a lane's series, in the white basis. The pass must be complete and have kept its ends.
    pub(crate) fn end(&self, lane: usize) -> End {
        let mut end = self.ends[lane].clone();
        let width = end.width;
        let drivers = self.elements - self.states;
        let mut row = vec![V::zero(); width];
        let mut whiten = |numbers: &mut [f64]| {
            row.iter_mut().zip(numbers.iter()).for_each(|(to, x)| *to = V::splat(*x));
            self.reduction.whiten(&mut row);
            numbers.iter_mut().zip(&row).for_each(|(to, x)| *to = x.lane(lane));
        };
        if width > 1 {
            end.state.chunks_exact_mut(width).for_each(&mut whiten);
        }
        end.coefficients = vec![0.0; drivers * width];
        for driver in 0..drivers {
            let row = &mut end.coefficients[driver * width..(driver + 1) * width];
            row[width - drivers + driver] = 1.0;
            whiten(row);
        }
        end
    }
}
