//! The series that the kernel reads: one a lane.

use crate::lanes::{MOST_LANES, Mask, Real};
use crate::request::Series;

/// Series on the model scale side by side. A point that is missing in a lane, or lies behind the end of its series, stands as zero
/// with its bit of `seen` off.
#[derive(Debug, Clone)]
pub(crate) struct Data<V> {
    /// Points of the longest series.
    pub(crate) n: usize,
    /// Points of each lane's series; 0 = the lane is idle.
    pub(crate) lengths: [usize; MOST_LANES],
    /// Observations.
    pub(crate) observed: Vec<V>,
    /// Which lanes are observed, per point.
    pub(crate) seen: Vec<Mask>,
    /// Which lanes' series reach a point.
    reaching: Vec<Mask>,
    /// Constant-coefficient drivers, each at least n long.
    pub(crate) drivers: Vec<Vec<V>>,
    /// Drivers that load on states, each at least n long.
    pub(crate) drifting: Vec<Vec<V>>,
}

impl<V: Real> Default for Data<V> {
    fn default() -> Self {
        Self {
            n: 0,
            lengths: [0; MOST_LANES],
            observed: Vec::new(),
            seen: Vec::new(),
            reaching: Vec::new(),
            drivers: Vec::new(),
            drifting: Vec::new(),
        }
    }
}

impl<V: Real> Data<V> {
    /// Makes all lanes idle.
    pub(crate) fn clear(&mut self, drivers: usize, drifting: usize) {
        (self.n, self.lengths) = (0, [0; MOST_LANES]);
        self.observed.clear();
        self.seen.clear();
        self.reaching.clear();
        self.drivers.resize_with(drivers, Vec::new);
        self.drifting.resize_with(drifting, Vec::new);
        self.drivers.iter_mut().chain(&mut self.drifting).for_each(Vec::clear);
    }

    /// Puts a series into a lane, in place of what was there.
    pub(crate) fn load(&mut self, lane: usize, series: &Series) {
        self.load_columns(lane, &series.observed, &series.drivers, &series.drifting_drivers);
    }

    /// [`Self::load`] with the columns apart.
    pub(crate) fn load_columns(
        &mut self,
        lane: usize,
        observed: &[f64],
        drivers: &[Vec<f64>],
        drifting: &[Vec<f64>],
    ) {
        let len = observed.len();
        self.lengths[lane] = len;
        self.n = self.lengths.iter().copied().max().unwrap_or(0);
        let reach = self.n.max(self.observed.len());
        self.observed.resize(reach, V::zero());
        self.seen.resize(reach, Mask::NONE);
        self.reaching.resize(reach, Mask::NONE);
        let bit = Mask::only(lane);
        for t in 0..reach {
            let y = observed.get(t).copied().unwrap_or(f64::NAN);
            let missing = y.is_nan();
            self.observed[t].set_lane(lane, if missing { 0.0 } else { y });
            self.seen[t] = if missing { self.seen[t] & !bit } else { self.seen[t] | bit };
            self.reaching[t] = if t < len { self.reaching[t] | bit } else { self.reaching[t] & !bit };
        }
        for (columns, from) in [(&mut self.drivers, drivers), (&mut self.drifting, drifting)] {
            for (column, from) in columns.iter_mut().zip(from) {
                column.resize(reach, V::zero());
                for (t, to) in column.iter_mut().enumerate() {
                    // Behind the end of the series a driver is its plan, which no likelihood reads.
                    to.set_lane(lane, if t < len { from[t] } else { 0.0 });
                }
            }
        }
    }

    /// Makes a lane idle.
    pub(crate) fn unload(&mut self, lane: usize) {
        self.lengths[lane] = 0;
        self.n = self.lengths.iter().copied().max().unwrap_or(0);
        for t in 0..self.observed.len() {
            self.observed[t].set_lane(lane, 0.0);
            self.seen[t] &= !Mask::only(lane);
            self.reaching[t] &= !Mask::only(lane);
        }
        for column in self.drivers.iter_mut().chain(&mut self.drifting) {
            column.iter_mut().for_each(|x| x.set_lane(lane, 0.0));
        }
    }

    /// Lanes whose series reaches point `t`.
    #[inline(always)]
    pub(crate) fn alive(&self, t: usize) -> Mask {
        self.reaching.get(t).copied().unwrap_or(Mask::NONE)
    }
}
