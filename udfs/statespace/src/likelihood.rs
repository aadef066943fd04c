//! Likelihoods to be evaluated many times, of one series or of several side by side.

use crate::evaluation::EvaluationError;
use crate::filter::Keep;
use crate::instructions::Instructions;
use crate::kernel::{Buffers, Kernel, Width};
#[cfg(target_arch = "x86_64")]
use crate::lanes::{Avx2, Avx512};
use crate::lanes::{Lanes, MOST_LANES, Portable};
use crate::request::Series;
use crate::structure::Model;
use crate::system::System;

/// The likelihood of a model on a series, to be evaluated many times: no allocation from the second call on.
#[derive(Debug)]
pub struct Likelihood {
    model: Model,
    system: System,
    kernel: Kernel<f64>,
}

impl Likelihood {
    /// A model and a series with its drivers.
    #[expect(
        clippy::needless_pass_by_value,
        reason = "the interface says that the series is the likelihood's from now on"
    )]
    pub fn new(model: Model, series: Series) -> Self {
        let system = model.system();
        let mut kernel = Kernel::new(&model, &system, series.drifting_drivers.len(), Buffers::default());
        kernel.data.load(0, &series);
        Self { model, system, kernel }
    }

    /// Diffuse log-likelihood at parameter values (natural units, order of [`Model::parameters`]).
    ///
    /// # Errors
    /// As [`crate::Evaluation::new`].
    pub fn at(&mut self, values: &[f64]) -> Result<f64, EvaluationError> {
        self.fill(values)?;
        self.kernel.filter(Keep::Likelihood);
        Ok(self.kernel.buffers.pass.reached(0)?)
    }

    /// Diffuse log-likelihood, score (length p) and average information (p x p, row-major), natural units.
    ///
    /// # Errors
    /// As [`crate::Evaluation::new`].
    pub fn with_score(&mut self, values: &[f64]) -> Result<(f64, &[f64], &[f64]), EvaluationError> {
        self.fill(values)?;
        self.kernel.score();
        let Buffers { pass, score, information, .. } = &self.kernel.buffers;
        Ok((pass.reached(0)?, &score.gradient, &information.matrix))
    }

    fn fill(&mut self, values: &[f64]) -> Result<(), EvaluationError> {
        self.model.fill(values, &mut self.system).map_err(|_| EvaluationError::NotStationary)?;
        self.kernel.set_lane(0, &self.model, &self.system);
        Ok(())
    }
}

/// The likelihoods of one model on up to [`Self::MOST`] series, evaluated in lock step, each at its own parameter values. A series' numbers are those of
/// [`Likelihood`] to the last bit, whatever is beside it.
#[derive(Debug)]
pub struct Likelihoods {
    model: Model,
    system: System,
    kernel: LaneKernel,
    count: usize,
}

/// A kernel in certain registers.
#[derive(Debug)]
enum LaneKernel {
    Baseline(Box<Kernel<Lanes<Portable>>>),
    #[cfg(target_arch = "x86_64")]
    Avx2(Box<Kernel<Lanes<Avx2>>>),
    #[cfg(target_arch = "x86_64")]
    Avx512(Box<Kernel<Lanes<Avx512>>>),
}

/// Score and information beside a likelihood.
type WithScore = (f64, Vec<f64>, Vec<f64>);

impl Likelihoods {
    /// Most series.
    pub const MOST: usize = MOST_LANES;

    /// A model and series with their drivers; those beyond [`Self::MOST`] are left out.
    pub fn new(model: Model, series: &[Series], instructions: Instructions) -> Self {
        let system = model.system();
        let series = &series[..series.len().min(Self::MOST)];
        let kernel = match instructions.or_widest() {
            #[cfg(target_arch = "x86_64")]
            Instructions::Avx512 => LaneKernel::Avx512(Box::new(loaded(&model, &system, series))),
            #[cfg(target_arch = "x86_64")]
            Instructions::Avx2 => LaneKernel::Avx2(Box::new(loaded(&model, &system, series))),
            _ => LaneKernel::Baseline(Box::new(loaded(&model, &system, series))),
        };
        Self { model, system, kernel, count: series.len() }
    }

    /// Diffuse log-likelihood of each series at its parameter values (natural units, order of [`Model::parameters`]).
    pub fn at(&mut self, values: &[&[f64]]) -> Vec<Result<f64, EvaluationError>> {
        let Self { model, system, kernel, count } = self;
        let values = &values[..*count];
        match kernel {
            LaneKernel::Baseline(kernel) => at(kernel, model, system, values),
            #[cfg(target_arch = "x86_64")]
            LaneKernel::Avx2(kernel) => at(kernel, model, system, values),
            #[cfg(target_arch = "x86_64")]
            LaneKernel::Avx512(kernel) => at(kernel, model, system, values),
        }
    }

    /// Diffuse log-likelihood, score (length p) and average information (p x p, row-major) of each series, natural units.
    pub fn with_score(&mut self, values: &[&[f64]]) -> Vec<Result<WithScore, EvaluationError>> {
        let Self { model, system, kernel, count } = self;
        let values = &values[..*count];
        match kernel {
            LaneKernel::Baseline(kernel) => with_score(kernel, model, system, values),
            #[cfg(target_arch = "x86_64")]
            LaneKernel::Avx2(kernel) => with_score(kernel, model, system, values),
            #[cfg(target_arch = "x86_64")]
            LaneKernel::Avx512(kernel) => with_score(kernel, model, system, values),
        }
    }
}

/// A kernel with a series in each of its first lanes.
fn loaded<V: Width>(model: &Model, system: &System, series: &[Series]) -> Kernel<V> {
    let drifting = series.first().map_or(0, |s| s.drifting_drivers.len());
    let mut kernel = Kernel::new(model, system, drifting, Buffers::default());
    for (lane, series) in series.iter().enumerate() {
        kernel.data.load(lane, series);
    }
    kernel
}

fn at<V: Width>(
    kernel: &mut Kernel<V>,
    model: &mut Model,
    system: &mut System,
    values: &[&[f64]],
) -> Vec<Result<f64, EvaluationError>> {
    let stationary = fill(kernel, model, system, values);
    kernel.filter(Keep::Likelihood);
    let answer = |lane: usize| Ok(kernel.buffers.pass.reached(lane)?);
    stationary.into_iter().enumerate().map(|(lane, fine)| fine.and_then(|()| answer(lane))).collect()
}

fn with_score<V: Width>(
    kernel: &mut Kernel<V>,
    model: &mut Model,
    system: &mut System,
    values: &[&[f64]],
) -> Vec<Result<WithScore, EvaluationError>> {
    let stationary = fill(kernel, model, system, values);
    kernel.score();
    let answer = |lane: usize| {
        let reached = kernel.buffers.pass.reached(lane)?;
        let (gradient, information) = kernel.derivatives_of(lane);
        Ok((reached, gradient, information))
    };
    stationary.into_iter().enumerate().map(|(lane, fine)| fine.and_then(|()| answer(lane))).collect()
}

/// Puts values into the lanes; an error where they leave the stationary region: such a lane keeps the values that it had.
fn fill<V: Width>(
    kernel: &mut Kernel<V>,
    model: &mut Model,
    system: &mut System,
    values: &[&[f64]],
) -> Vec<Result<(), EvaluationError>> {
    let filled = values.iter().enumerate().map(|(lane, values)| {
        model.fill(values, system).map_err(|_| EvaluationError::NotStationary)?;
        kernel.set_lane(lane, model, system);
        Ok(())
    });
    filled.collect()
}
