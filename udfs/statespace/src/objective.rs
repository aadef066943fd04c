//! The likelihood of one model on one series as a function of its parameters, with its score and average
//! information; allocates nothing in an evaluation once its buffers have grown.

use crate::estimate::{Answer, Question};
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

/// A likelihood that answers the questions of a search.
pub(crate) struct Objective<'a> {
    pub(crate) model: Model,
    system: System,
    kernel: Kernel<f64>,
    workspace: &'a mut Workspace,
}

impl<'a> Objective<'a> {
    pub(crate) fn new(model: Model, series: &Series, workspace: &'a mut Workspace) -> Self {
        let system = model.system();
        let buffers = std::mem::take(&mut workspace.single);
        let mut kernel = Kernel::new(&model, &system, series.drifting_drivers.len(), buffers);
        kernel.data.load(0, series);
        Self { model, system, kernel, workspace }
    }

    /// The vector instructions to work with.
    pub(crate) fn instructions(&self) -> Instructions {
        self.workspace.instructions
    }

    /// The likelihood at the point in question, with score and information where they are asked for.
    pub(crate) fn answer(&mut self, question: Question<'_>) -> Result<Answer<'_>, EvaluationError> {
        self.model.fill(question.values, &mut self.system).map_err(|_| EvaluationError::NotStationary)?;
        self.kernel.set_lane(0, &self.model, &self.system);
        let with = question.derivatives;
        if with {
            self.kernel.score(Instructions::Baseline);
        } else {
            self.kernel.filter(Keep::Likelihood, Instructions::Baseline);
        }
        let Buffers { pass, score, information, .. } = &self.kernel.buffers;
        Ok(Answer {
            log_likelihood: pass.reached(0)?,
            rss: pass.reduction.rss(),
            degrees: pass.observed[0] as f64 - pass.elements as f64,
            gradient: if with { &score.gradient } else { &[] },
            information: if with { &information.matrix } else { &[] },
        })
    }
}

impl Drop for Objective<'_> {
    fn drop(&mut self) {
        self.workspace.single = std::mem::take(&mut self.kernel.buffers);
    }
}
