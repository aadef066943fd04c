//! The likelihood of one model on one series as a function of its parameters, with its score and average
//! information; allocates nothing in an evaluation once its buffers have grown.

use crate::estimate::{Answer, Question};
use crate::evaluation::EvaluationError;
use crate::filter::Keep;
use crate::instructions::Instructions;
use crate::kernel::{Buffers, Kernel};
#[cfg(target_arch = "x86_64")]
use crate::lanes::{Avx2, Avx512};
use crate::lanes::{Lanes, Portable};
use crate::request::Series;
use crate::structure::Model;
use crate::system::System;

/// Buffers that pass from series to series, and the vector instructions to work with.
#[derive(Debug, Clone)]
pub struct Workspace {
    pub(crate) single: Buffers<f64>,
    pub(crate) lanes: LaneBuffers,
    pub(crate) instructions: Instructions,
}

/// Buffers of eight lanes in the registers of the workspace's instructions.
#[derive(Debug, Clone)]
pub(crate) enum LaneBuffers {
    Baseline(Box<Buffers<Lanes<Portable>>>),
    #[cfg(target_arch = "x86_64")]
    Avx2(Box<Buffers<Lanes<Avx2>>>),
    #[cfg(target_arch = "x86_64")]
    Avx512(Box<Buffers<Lanes<Avx512>>>),
}

impl LaneBuffers {
    fn for_these(instructions: Instructions) -> Self {
        match instructions {
            #[cfg(target_arch = "x86_64")]
            Instructions::Avx512 => Self::Avx512(Box::default()),
            #[cfg(target_arch = "x86_64")]
            Instructions::Avx2 => Self::Avx2(Box::default()),
            _ => Self::Baseline(Box::default()),
        }
    }
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
        let instructions = instructions.or_widest();
        Self { single: Buffers::default(), lanes: LaneBuffers::for_these(instructions), instructions }
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
            self.kernel.score();
        } else {
            self.kernel.filter(Keep::Likelihood);
        }
        let Buffers { pass, score, information, .. } = &self.kernel.buffers;
        Ok(Answer {
            log_likelihood: pass.reached(0)?,
            rss: pass.rss(0),
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
