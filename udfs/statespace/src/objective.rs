//! The likelihood of one model on one series as a function of its parameters, with its score and average
//! information; counts its evaluations and allocates nothing in them once its buffers have grown.

use crate::evaluation::EvaluationError;
use crate::filter::Keep;
use crate::instructions::Instructions;
use crate::kernel::{Buffers, Kernel};
use crate::lanes::Lanes;
use crate::request::Series;
use crate::structure::Model;
use crate::system::System;

/// Buffers that pass from series to series, and the vector instructions to work with.
#[derive(Debug, Clone)]
pub struct Workspace {
    pub(crate) single: Buffers<f64>,
    pub(crate) lanes: Buffers<Lanes>,
    pub(crate) instructions: Instructions,
}

impl Default for Workspace {
    fn default() -> Self {
        Self::new()
    }
}

impl Workspace {
    /// Empty buffers; they grow with the first series. The widest instructions that the processor has.
    pub fn new() -> Self {
        Self::with_instructions(Instructions::widest())
    }

    /// The same with these instructions. They change the time that things take and nothing else.
    pub fn with_instructions(instructions: Instructions) -> Self {
        Self { single: Buffers::default(), lanes: Buffers::default(), instructions }
    }
}

/// The function that estimation climbs.
pub(crate) struct Objective<'a> {
    pub(crate) model: Model,
    system: System,
    kernel: Kernel<f64>,
    workspace: &'a mut Workspace,
    /// Likelihood evaluations so far, with or without derivatives.
    pub(crate) evaluations: usize,
}

/// The likelihood at one point and what its shape needs.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Value {
    pub(crate) log_likelihood: f64,
    /// Residual sum of squares of the reduced rows: `n - d` at the best common scale of all variances.
    pub(crate) rss: f64,
    /// n - d.
    pub(crate) degrees: f64,
}

impl<'a> Objective<'a> {
    pub(crate) fn new(model: Model, series: &Series, workspace: &'a mut Workspace) -> Self {
        let system = model.system();
        let buffers = std::mem::take(&mut workspace.single);
        let mut kernel = Kernel::new(&model, &system, series.drifting_drivers.len(), buffers);
        kernel.data.load(0, series);
        Self { model, system, kernel, workspace, evaluations: 0 }
    }

    /// The likelihood alone.
    pub(crate) fn value(&mut self, values: &[f64]) -> Result<Value, EvaluationError> {
        self.fill(values)?;
        self.kernel.filter(Keep::Likelihood, Instructions::Baseline);
        self.reached()
    }

    /// The likelihood with score and information, which then stand in [`Self::gradient`] and [`Self::information`].
    pub(crate) fn full(&mut self, values: &[f64]) -> Result<Value, EvaluationError> {
        self.fill(values)?;
        self.kernel.score(Instructions::Baseline);
        self.reached()
    }

    fn fill(&mut self, values: &[f64]) -> Result<(), EvaluationError> {
        self.evaluations += 1;
        self.model.fill(values, &mut self.system).map_err(|_| EvaluationError::NotStationary)?;
        self.kernel.set_lane(0, &self.model, &self.system);
        Ok(())
    }

    fn reached(&self) -> Result<Value, EvaluationError> {
        let pass = &self.kernel.buffers.pass;
        Ok(Value {
            log_likelihood: pass.reached(0)?,
            rss: pass.reduction.rss(),
            degrees: pass.observed[0] as f64 - pass.elements as f64,
        })
    }

    /// Score at the last [`Self::full`] point, natural units.
    pub(crate) fn gradient(&self) -> &[f64] {
        &self.kernel.buffers.score.gradient
    }

    /// Average information at the last [`Self::full`] point, row-major, natural units.
    pub(crate) fn information(&self) -> &[f64] {
        &self.kernel.buffers.information.matrix
    }
}

impl Drop for Objective<'_> {
    fn drop(&mut self) {
        self.workspace.single = std::mem::take(&mut self.kernel.buffers);
    }
}
