//! The kernel: all that runs along several series of one structure side by side, with its buffers.
//!
//! [`Kernel`] holds the series and the parameter values of each lane and does what the rest of the crate asks for: a likelihood, a score with
//! its information, a smoothing. With `f64` it has one lane. With [`Lanes`] it has eight, and its work is compiled for the
//! vector instructions of the processor ([`Instructions`]).

use crate::data::Data;
use crate::derivatives::Derivative;
use crate::dynamics::Dynamics;
use crate::filter::{self, Keep, Pass};
use crate::information::Information;
use crate::instructions::{Instructions, Task};
#[cfg(target_arch = "x86_64")]
use crate::lanes::{Avx2, Avx512};
use crate::lanes::{Lanes, Mask, Portable, Real};
use crate::score::Score;
use crate::smoother::{Functional, Smoother};
use crate::structure::Model;
use crate::system::System;

/// Series and systems side by side.
#[derive(Debug, Clone)]
pub(crate) struct Kernel<V> {
    pub(crate) dynamics: Dynamics<V>,
    pub(crate) derivatives: Vec<Derivative<V>>,
    pub(crate) data: Data<V>,
    pub(crate) buffers: Buffers<V>,
}

/// What is reused from batch to batch.
#[derive(Debug, Clone, Default)]
pub(crate) struct Buffers<V> {
    pub(crate) pass: Pass<V>,
    pub(crate) score: Score<V>,
    pub(crate) information: Information<V>,
    pub(crate) smoother: Smoother<V>,
}

impl<V: Width> Kernel<V> {
    /// All lanes idle. `drifting`: drivers that load on states.
    pub(crate) fn new(model: &Model, system: &System, drifting: usize, buffers: Buffers<V>) -> Self {
        let mut data = Data::default();
        data.clear(model.drivers, drifting);
        Self { dynamics: Dynamics::new(system), derivatives: Derivative::all(&model.effects), data, buffers }
    }

    /// Puts the numbers of a system, and the derivatives that [`Model::fill`] left in its model, into a lane.
    pub(crate) fn set_lane(&mut self, lane: usize, model: &Model, system: &System) {
        self.dynamics.set_lane(lane, system);
        Derivative::set_lane(&mut self.derivatives, lane, &model.effects);
    }

    /// Runs the filter.
    pub(crate) fn filter(&mut self, keep: Keep) {
        self.buffers.pass.keep_open = Mask::NONE;
        let Self { dynamics, data, buffers, .. } = self;
        V::perform(Filter { dynamics, data, keep, pass: &mut buffers.pass });
    }

    /// Runs filter, score and information. What each lane reached is that of the first pass, as [`Self::filter`] finds it, also where score
    /// and information need a second one with its columns open: what is reported must not depend on what else was asked.
    pub(crate) fn score(&mut self) {
        let Self { dynamics, derivatives, data, buffers } = self;
        buffers.pass.keep_open = Mask::NONE;
        let failed = V::perform(ScorePass { dynamics, derivatives, data, buffers });
        if !failed.is_none() {
            // The other lanes come out as they did: to the last bit.
            let reached = buffers.pass.outcome;
            buffers.pass.keep_open = failed;
            V::perform(ScorePass { dynamics, derivatives, data, buffers });
            buffers.pass.outcome = reached;
        }
    }

    /// Score (length p) and average information (p x p row-major) of a lane after [`Self::score`], natural units.
    pub(crate) fn derivatives_of(&self, lane: usize) -> (Vec<f64>, Vec<f64>) {
        let of = |numbers: &[V]| numbers.iter().map(|x| x.lane(lane)).collect();
        (of(&self.buffers.score.gradient), of(&self.buffers.information.matrix))
    }

    /// Runs the filter, keeping everything, and smooths; `filtered` sees the pass before its rows are whitened. Where the way back needs a second
    /// pass with columns open, the smoothing alone is that one's.
    pub(crate) fn smooth(
        &mut self,
        functionals: &[Functional],
        level: Option<usize>,
        filtered: impl FnOnce(&Pass<V>),
    ) {
        let Self { dynamics, data, buffers, .. } = self;
        let Buffers { pass, smoother, .. } = buffers;
        pass.keep_open = Mask::NONE;
        V::perform(Filter { dynamics, data, keep: Keep::Everything, pass });
        filtered(pass);
        let failed = V::perform(Smooth { dynamics, data, functionals, level, pass, smoother });
        if !failed.is_none() {
            pass.keep_open = failed;
            V::perform(Filter { dynamics, data, keep: Keep::Everything, pass });
            V::perform(Smooth { dynamics, data, functionals, level, pass, smoother });
        }
    }
}

/// A [`Real`] that knows how its work is compiled.
pub(crate) trait Width: Real {
    fn perform<T: Task>(task: T) -> T::Output;
}

impl Width for f64 {
    fn perform<T: Task>(task: T) -> T::Output {
        Instructions::Baseline.perform(task)
    }
}

impl Width for Lanes<Portable> {
    fn perform<T: Task>(task: T) -> T::Output {
        Instructions::Baseline.perform(task)
    }
}

#[cfg(target_arch = "x86_64")]
impl Width for Lanes<Avx2> {
    fn perform<T: Task>(task: T) -> T::Output {
        Instructions::Avx2.perform(task)
    }
}

#[cfg(target_arch = "x86_64")]
impl Width for Lanes<Avx512> {
    fn perform<T: Task>(task: T) -> T::Output {
        Instructions::Avx512.perform(task)
    }
}

struct Filter<'a, V> {
    dynamics: &'a Dynamics<V>,
    data: &'a Data<V>,
    keep: Keep,
    pass: &'a mut Pass<V>,
}

impl<V: Real> Task for Filter<'_, V> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        filter::run(self.dynamics, self.data, self.keep, self.pass);
    }
}

struct ScorePass<'a, V> {
    dynamics: &'a Dynamics<V>,
    derivatives: &'a [Derivative<V>],
    data: &'a Data<V>,
    buffers: &'a mut Buffers<V>,
}

impl<V: Real> Task for ScorePass<'_, V> {
    type Output = Mask;
    #[inline(always)]
    fn run(self) -> Mask {
        let Self { dynamics, derivatives, data, buffers } = self;
        let Buffers { pass, score, information, .. } = buffers;
        let shapes = derivatives.iter().any(|d| !d.transition.is_empty());
        filter::run(dynamics, data, if shapes { Keep::Everything } else { Keep::Gains }, pass);
        pass.whiten_rows();
        let failed = score.compute(derivatives, dynamics, data, pass) & pass.sound();
        if failed.is_none() {
            information.compute(derivatives, dynamics, data, pass, &score.paths);
        }
        failed
    }
}

struct Smooth<'a, V> {
    dynamics: &'a Dynamics<V>,
    data: &'a Data<V>,
    functionals: &'a [Functional],
    level: Option<usize>,
    pass: &'a mut Pass<V>,
    smoother: &'a mut Smoother<V>,
}

impl<V: Real> Task for Smooth<'_, V> {
    type Output = Mask;
    #[inline(always)]
    fn run(self) -> Mask {
        self.pass.whiten_rows();
        self.smoother.run(self.dynamics, self.data, self.pass, self.functionals, self.level)
            & self.pass.sound()
    }
}
