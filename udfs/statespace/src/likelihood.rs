//! Likelihoods to be evaluated many times, of one series or of several side by side.

use crate::evaluation::EvaluationError;
use crate::filter::Keep;
use crate::instructions::Instructions;
use crate::kernel::{Buffers, Kernel};
use crate::lanes::{Lanes, MOST_LANES};
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
        self.kernel.filter(Keep::Likelihood, Instructions::Baseline);
        Ok(self.kernel.buffers.pass.reached(0)?)
    }

    /// Diffuse log-likelihood, score (length p) and average information (p x p, row-major), natural units.
    ///
    /// # Errors
    /// As [`crate::Evaluation::new`].
    pub fn with_score(&mut self, values: &[f64]) -> Result<(f64, &[f64], &[f64]), EvaluationError> {
        self.fill(values)?;
        self.kernel.score(Instructions::Baseline);
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
    kernel: Kernel<Lanes>,
    instructions: Instructions,
    count: usize,
}

impl Likelihoods {
    /// Most series.
    pub const MOST: usize = MOST_LANES;

    /// A model and series with their drivers; those beyond [`Self::MOST`] are left out.
    pub fn new(model: Model, series: &[Series], instructions: Instructions) -> Self {
        let system = model.system();
        let count = series.len().min(Self::MOST);
        let drifting = series.first().map_or(0, |s| s.drifting_drivers.len());
        let mut kernel = Kernel::new(&model, &system, drifting, Buffers::default());
        for (lane, series) in series[..count].iter().enumerate() {
            kernel.data.load(lane, series);
        }
        Self { model, system, kernel, instructions, count }
    }

    /// Diffuse log-likelihood of each series at its parameter values (natural units, order of [`Model::parameters`]).
    pub fn at(&mut self, values: &[&[f64]]) -> Vec<Result<f64, EvaluationError>> {
        let stationary = self.fill(values);
        self.kernel.filter(Keep::Likelihood, self.instructions);
        self.answers(&stationary, |kernel, lane| Ok(kernel.buffers.pass.reached(lane)?))
    }

    /// Diffuse log-likelihood, score (length p) and average information (p x p, row-major) of each series, natural units.
    pub fn with_score(
        &mut self,
        values: &[&[f64]],
    ) -> Vec<Result<(f64, Vec<f64>, Vec<f64>), EvaluationError>> {
        let stationary = self.fill(values);
        self.kernel.score(self.instructions);
        self.answers(&stationary, |kernel, lane| {
            let reached = kernel.buffers.pass.reached(lane)?;
            let (gradient, information) = kernel.derivatives_of(lane);
            Ok((reached, gradient, information))
        })
    }

    /// Which of the series have values in the stationary region; the others keep the values that they had.
    fn fill(&mut self, values: &[&[f64]]) -> Vec<bool> {
        let filled = values[..self.count].iter().enumerate().map(|(lane, values)| {
            let stationary = self.model.fill(values, &mut self.system).is_ok();
            if stationary {
                self.kernel.set_lane(lane, &self.model, &self.system);
            }
            stationary
        });
        filled.collect()
    }

    fn answers<T>(
        &self,
        stationary: &[bool],
        answer: impl Fn(&Kernel<Lanes>, usize) -> Result<T, EvaluationError>,
    ) -> Vec<Result<T, EvaluationError>> {
        let lanes = stationary.iter().enumerate();
        lanes
            .map(
                |(lane, &fine)| {
                    if fine { answer(&self.kernel, lane) } else { Err(EvaluationError::NotStationary) }
                },
            )
            .collect()
    }
}
