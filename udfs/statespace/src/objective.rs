//! The likelihood of one model on one series as a function of its parameters, with its score and average
//! information; allocates nothing in an evaluation once its buffers have grown.

use crate::estimate::{Answer, Question};
use crate::evaluation::{EvaluationError, data_of};
use crate::filter::{self, Data, Keep, Pass};
use crate::information::Information;
use crate::request::Series;
use crate::score::Score;
use crate::structure::Model;
use crate::system::System;

/// The likelihood of a model on a series, to be evaluated many times: no allocation from the second call on.
#[derive(Debug)]
pub struct Likelihood {
    model: Model,
    system: System,
    series: Series,
    workspace: Workspace,
}

impl Likelihood {
    /// A model and a series with its drivers.
    pub fn new(model: Model, series: Series) -> Self {
        let system = model.system();
        Self { model, system, series, workspace: Workspace::new() }
    }

    /// Diffuse log-likelihood at parameter values (natural units, order of [`Model::parameters`]).
    ///
    /// # Errors
    /// As [`crate::Evaluation::new`].
    pub fn at(&mut self, values: &[f64]) -> Result<f64, EvaluationError> {
        self.model.fill(values, &mut self.system).map_err(|_| EvaluationError::NotStationary)?;
        let pass = &mut self.workspace.pass;
        filter::run(&self.system, data_of(&self.series), Keep::Likelihood, pass)?;
        Ok(pass.log_likelihood)
    }

    /// Diffuse log-likelihood, score (length p) and average information (p x p, row-major), natural units.
    ///
    /// # Errors
    /// As [`crate::Evaluation::new`].
    pub fn with_score(&mut self, values: &[f64]) -> Result<(f64, &[f64], &[f64]), EvaluationError> {
        self.model.fill(values, &mut self.system).map_err(|_| EvaluationError::NotStationary)?;
        let data = data_of(&self.series);
        let value = evaluate(&self.model, &self.system, data, &mut self.workspace)?;
        Ok((value, &self.workspace.score.gradient, &self.workspace.information.matrix))
    }
}

/// Likelihood, score and information into the workspace; returns the log-likelihood.
fn evaluate(
    model: &Model,
    system: &System,
    data: Data<'_>,
    workspace: &mut Workspace,
) -> Result<f64, EvaluationError> {
    let keep = if model.has_shapes() { Keep::Everything } else { Keep::Gains };
    let Workspace { pass, score, information } = workspace;
    filter::run(system, data, keep, pass)?;
    pass.whiten_rows();
    if score.compute(model, system, data, pass).is_err() {
        pass.keep_open = true;
        let again = filter::run(system, data, keep, pass);
        pass.keep_open = false;
        again?;
        pass.whiten_rows();
        // Without a collapse there is nothing to go back across.
        score.compute(model, system, data, pass).map_err(|_| EvaluationError::NotPositive)?;
    }
    information.compute(model, system, data, pass, &score.paths);
    Ok(pass.log_likelihood)
}

/// Buffers that pass from series to series.
#[derive(Debug, Clone, Default)]
pub struct Workspace {
    pass: Pass,
    score: Score,
    information: Information,
}

impl Workspace {
    /// Empty buffers; they grow with the first series.
    pub fn new() -> Self {
        Self::default()
    }
}

/// A likelihood that answers the questions of a search.
pub(crate) struct Objective<'a> {
    pub(crate) model: Model,
    system: System,
    data: Data<'a>,
    workspace: &'a mut Workspace,
}

impl<'a> Objective<'a> {
    pub(crate) fn new(model: Model, data: Data<'a>, workspace: &'a mut Workspace) -> Self {
        let system = model.system();
        Self { model, system, data, workspace }
    }

    /// The likelihood at the point in question, with score and information where they are asked for.
    pub(crate) fn answer(&mut self, question: Question<'_>) -> Result<Answer<'_>, EvaluationError> {
        self.model.fill(question.values, &mut self.system).map_err(|_| EvaluationError::NotStationary)?;
        let with = question.derivatives;
        if with {
            evaluate(&self.model, &self.system, self.data, self.workspace)?;
        } else {
            filter::run(&self.system, self.data, Keep::Likelihood, &mut self.workspace.pass)?;
        }
        let Workspace { pass, score, information } = &*self.workspace;
        Ok(Answer {
            log_likelihood: pass.log_likelihood,
            rss: pass.reduction.rss(),
            degrees: pass.observed as f64 - pass.elements as f64,
            gradient: if with { &score.gradient } else { &[] },
            information: if with { &information.matrix } else { &[] },
        })
    }
}
