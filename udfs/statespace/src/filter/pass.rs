//! What a pass of the filter keeps.

use super::{End, FilterError};
use crate::buffer::refill;
use crate::data::Data;
use crate::dynamics::{Dynamics, packed_len};
use crate::lanes::{MOST_LANES, Mask, Real};
use crate::reduction::Reduction;

/// How much of the pass is kept.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd)]
pub(crate) enum Keep {
    /// Nothing: the likelihood only.
    Likelihood,
    /// Gains and innovations: what the score needs.
    Gains,
    /// Also where each series ends.
    Ends,
    /// Also the predicted columns and covariance of each step: what state smoothing needs.
    Everything,
}

/// What the lanes of a pass reached.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Outcome<V> {
    log_likelihood: V,
    /// Residual sum of squares of the reduced rows.
    rss: V,
    /// Why a lane has no likelihood.
    failure: [Option<FilterError>; MOST_LANES],
}

/// Buffers and results of one pass; reused from pass to pass without allocation.
#[derive(Debug, Clone, Default)]
pub(crate) struct Pass<V> {
    /// Points of the longest series.
    pub(crate) n: usize,
    pub(crate) m: usize,
    /// Diffuse elements d: states first, then constant drivers.
    pub(crate) elements: usize,
    /// Diffuse states among them.
    pub(crate) states: usize,
    pub(crate) lengths: [usize; MOST_LANES],
    /// Lanes that hold a series.
    pub(crate) live: Mask,
    /// First point of each lane whose columns no longer hold the diffuse states; beyond n when they were never taken in.
    pub(crate) collapsed_at: [usize; MOST_LANES],
    /// Lanes that collapse, per point.
    pub(super) collapses: Vec<Mask>,
    /// First point at which no lane has them, so that rows and columns are narrower.
    pub(crate) narrow_from: usize,
    /// `m x (diffuse states)`: what each unit of their posterior moves in the predicted state at the collapse.
    pub(crate) bridge: Vec<V>,
    /// Lanes whose series turned out too nearly singular for it: columns then stay open.
    pub(crate) keep_open: Mask,
    /// Observed points of each lane.
    pub(crate) observed: [usize; MOST_LANES],
    /// What each lane reached.
    pub(crate) outcome: Outcome<V>,
    /// Innovation variance per point; means nothing where missing.
    pub(crate) f: Vec<V>,
    /// Its inverse; zero where missing.
    pub(crate) inverse: Vec<V>,
    /// Lanes whose gain is that of the point before.
    pub(crate) steady: Vec<Mask>,
    /// Which of the kept gains and covariances is that of a point.
    entry: Vec<u32>,
    /// `m` each: `P_t Z' / F_t`.
    gains: Vec<V>,
    /// Packed predicted covariances.
    covariances: Vec<V>,
    /// The innovation's data path and its response to each element still open, a row of [`Self::width`] per point. Where the point is
    /// missing, the same with zero in place of the observation.
    rows: Vec<V>,
    /// Predicted columns: `m` rows of [`Self::width`] per point.
    columns: Vec<V>,
    pub(super) ends: Vec<End>,
    /// Columns after the last point: prediction of n + 1.
    pub(crate) a: Vec<V>,
    /// Packed covariance after the last point: prediction of n + 1.
    pub(crate) p: Vec<V>,
    pub(crate) reduction: Reduction<V>,
    pub(super) next: Vec<V>,
    pub(super) pz: Vec<V>,
    pub(super) gain: Vec<V>,
    pub(super) row: Vec<V>,
    pub(super) spare: Vec<V>,
}

impl<V: Real> Pass<V> {
    #[inline(always)]
    pub(super) fn prepare(&mut self, dynamics: &Dynamics<V>, data: &Data<V>, keep: Keep) {
        let (n, m) = (data.n, dynamics.states);
        let d = dynamics.diffuse.len() + data.drivers.len();
        (self.n, self.m, self.elements, self.states) = (n, m, d, dynamics.diffuse.len());
        self.lengths = data.lengths;
        self.live = data.alive(0);
        self.collapsed_at = [n + 1; MOST_LANES];
        self.narrow_from = n + 1;
        refill(&mut self.collapses, n + 1);
        self.outcome = Outcome::default();
        let seen = &data.seen[..n];
        for lane in 0..V::LANES {
            self.observed[lane] = seen.iter().filter(|mask| mask.holds(lane)).count();
        }
        refill(&mut self.a, m * (d + 1));
        refill(&mut self.p, packed_len(m));
        refill(&mut self.next, packed_len(m));
        refill(&mut self.pz, m);
        refill(&mut self.gain, m);
        refill(&mut self.row, d + 1);
        refill(&mut self.spare, dynamics.spare_len());
        refill(&mut self.bridge, m * self.states);
        self.reduction.reset(d, self.states, self.live);
        // What is kept of each point is written anew by the pass.
        self.gains.clear();
        self.covariances.clear();
        self.rows.clear();
        self.columns.clear();
        if keep >= Keep::Gains {
            // As if nothing settled or collapsed: no other values of the parameters make them grow.
            self.gains.reserve(n * m);
            self.rows.reserve(n * (d + 1));
            self.f.resize(n, V::zero());
            self.inverse.resize(n, V::zero());
            self.steady.resize(n, Mask::NONE);
            self.entry.resize(n, 0);
        }
    }

    /// Notes why lanes fail, unless they have failed before.
    #[inline(always)]
    pub(super) fn fail(&mut self, lanes: Mask, why: FilterError) {
        for lane in (lanes & self.live).lanes() {
            self.outcome.failure[lane].get_or_insert(why);
        }
    }

    /// Keeps gain and covariance of a step at which they are new.
    #[inline(always)]
    pub(super) fn keep_covariance(&mut self, keep: Keep) {
        if keep >= Keep::Gains {
            self.gains.extend_from_slice(&self.gain);
        }
        if keep == Keep::Everything {
            self.covariances.extend_from_slice(&self.p);
        }
    }

    /// Keeps what every point has.
    #[inline(always)]
    pub(super) fn keep_point(
        &mut self,
        t: usize,
        width: usize,
        keep: Keep,
        (f, inverse, steady): (V, V, Mask),
    ) {
        if keep >= Keep::Gains {
            self.f[t] = f;
            self.inverse[t] = inverse;
            self.steady[t] = steady;
            self.entry[t] = (self.gains.len() / self.m.max(1)).saturating_sub(1) as u32;
            self.rows.extend_from_slice(&self.row[..width]);
        }
        if keep == Keep::Everything {
            self.columns.extend_from_slice(&self.a[..self.m * width]);
        }
    }

    /// Goes on with the next covariance but in the settled lanes.
    #[inline(always)]
    pub(super) fn freeze(&mut self, settled: Mask, alive: Mask) {
        if (settled | !alive).is_all::<V>() {
            return;
        }
        if !settled.is_none() {
            for (next, p) in self.next.iter_mut().zip(&self.p) {
                *next = V::select(settled, *p, *next);
            }
        }
        std::mem::swap(&mut self.p, &mut self.next);
    }

    /// Ends the pass: reduces the last rows and adds up the likelihood.
    #[inline(always)]
    pub(super) fn finish(&mut self, log_f: V) {
        let undetermined = self.reduction.finish();
        let (log_diagonal, rss) = (self.reduction.log_diagonal(), self.reduction.rss());
        self.outcome.rss = rss;
        for lane in self.live.lanes() {
            if let Some(element) = undetermined[lane] {
                self.fail(Mask::only(lane), FilterError::Undetermined(element));
            }
            let free = self.observed[lane] as f64 - self.elements as f64;
            let sum = free * std::f64::consts::TAU.ln()
                + log_f.lane(lane)
                + 2.0 * log_diagonal.lane(lane)
                + rss.lane(lane);
            self.outcome.log_likelihood.set_lane(lane, -0.5 * sum);
            if !sum.is_finite() {
                self.fail(Mask::only(lane), FilterError::NotPositive(self.lengths[lane]));
            }
        }
    }

    /// What a lane reached.
    pub(crate) fn reached(&self, lane: usize) -> Result<f64, FilterError> {
        match self.outcome.failure[lane] {
            Some(failure) => Err(failure),
            None => Ok(self.outcome.log_likelihood.lane(lane)),
        }
    }

    /// Residual sum of squares of a lane: `n - d` at the best common scale of all variances.
    pub(crate) fn rss(&self, lane: usize) -> f64 {
        self.outcome.rss.lane(lane)
    }

    /// Live lanes that have a likelihood.
    pub(crate) fn sound(&self) -> Mask {
        let failed = (0..V::LANES).filter(|&lane| self.outcome.failure[lane].is_some());
        failed.fold(self.live, |sound, lane| sound & !Mask::only(lane))
    }

    /// Lanes whose columns at `t` hold the diffuse states but will not for ever.
    #[inline(always)]
    pub(crate) fn before_collapse(&self, t: usize) -> Mask {
        let mut bits = 0;
        for lane in 0..V::LANES {
            bits |= u8::from(t < self.collapsed_at[lane] && self.collapsed_at[lane] <= self.n) << lane;
        }
        Mask(bits)
    }

    /// Lanes that collapse at `t`.
    #[inline(always)]
    pub(crate) fn collapsing(&self, t: usize) -> Mask {
        self.collapses[t]
    }

    /// Width of the row and of the columns at `t`: the data and the elements still open in some lane.
    #[inline(always)]
    pub(crate) fn width(&self, t: usize) -> usize {
        1 + self.elements - if t >= self.narrow_from { self.states } else { 0 }
    }

    /// Numbers of all rows before `t`.
    #[inline(always)]
    fn before(&self, t: usize) -> usize {
        let wide = t.min(self.narrow_from);
        wide * (1 + self.elements) + (t - wide) * (1 + self.elements - self.states)
    }

    /// The kept row at `t`.
    #[inline(always)]
    pub(crate) fn row(&self, t: usize) -> &[V] {
        &self.rows[self.before(t)..][..self.width(t)]
    }

    /// The kept gain at `t`; zeros where missing.
    #[inline(always)]
    pub(crate) fn gain(&self, t: usize) -> &[V] {
        &self.gains[self.entry[t] as usize * self.m..][..self.m]
    }

    /// The kept packed covariance at `t`.
    #[inline(always)]
    pub(crate) fn covariance(&self, t: usize) -> &[V] {
        let len = packed_len(self.m);
        &self.covariances[self.entry[t] as usize * len..][..len]
    }

    /// The predicted columns of one state at `t`.
    #[inline(always)]
    pub(crate) fn state_columns(&self, t: usize, state: usize) -> &[V] {
        let width = self.width(t);
        &self.columns[self.before(t) * self.m + state * width..][..width]
    }

    /// Turns the kept rows into mean path and columns, white but for the collapsed elements before their collapse: those
    /// stand in their white form given the points before it.
    #[inline(always)]
    pub(crate) fn whiten_rows(&mut self) {
        let (wide, narrow) = (1 + self.elements, 1 + self.elements - self.states);
        let (before, after) = self.rows.split_at_mut(self.narrow_from.min(self.n) * wide);
        for row in before.chunks_exact_mut(wide) {
            self.reduction.whiten(row);
        }
        if narrow > 1 {
            for row in after.chunks_exact_mut(narrow) {
                self.reduction.whiten(row);
            }
        }
    }
}
