//! Many series of one request, fitted in lock step.
//!
//! Series that share a structure are estimated and smoothed side by side, a lane each ([`crate::lanes`]). When the search of one has ended,
//! its lane goes to the next that waits. A series' result is that of [`crate::fit()`] to the last bit: it depends on no other series, nor on the lane or the
//! order.

mod lockstep;

use std::sync::Arc;

use crate::box_cox;
use crate::choose::{self, Choice};
use crate::components;
use crate::error::Trouble;
use crate::evaluation::{Evaluation, EvaluationError};
use crate::filter::{Keep, Pass};
use crate::fit::{self, Fit, Prepared};
use crate::instructions::Instructions;
use crate::kernel::{Buffers, Kernel, Width};
use crate::lanes::MOST_LANES;
use crate::objective::{LaneBuffers, Workspace};
use crate::request::{Request, Series};
use crate::structure::{Model, Structure};
use crate::transform::Transform;

/// Fits many series of one request; the results stand in the order of the series. `smoothed`: the fits will be asked for their
/// components, so that their smoothing is done in lock step too.
///
/// The result of a series is the same, bit for bit, as [`crate::fit()`]'s: it depends on no other series.
pub fn fit_many(
    series: &[&Series],
    request: &Request,
    smoothed: bool,
    workspace: &mut Workspace,
) -> Vec<Result<Fit, Trouble>> {
    let mut results: Vec<Option<Result<Fit, Trouble>>> = Vec::with_capacity(series.len());
    let mut waiting: Vec<Waiting> = Vec::with_capacity(series.len());
    let mut models = Models::default();
    for (index, series) in series.iter().enumerate() {
        results.push(match ready(series, request, &mut models, workspace) {
            Ok((prepared, power_estimated)) => {
                waiting.push(Waiting { index, prepared, power_estimated });
                None
            }
            Err(trouble) => Some(Err(trouble)),
        });
    }
    while let Some(first) = waiting.first() {
        let structure = first.prepared.structure.clone();
        let (together, others) = waiting.into_iter().partition(|w| w.prepared.structure == structure);
        waiting = others;
        let mut batch: Vec<Waiting> = together;
        if batch.len() == 1 {
            // Alone there is nothing to be side by side with.
            for Waiting { index, prepared, power_estimated } in batch {
                let model = models.of(&structure);
                let fit = fit::fit_prepared(prepared, model, request, workspace);
                results[index] = Some(fit.map(|fit| fit.with_power(power_estimated)));
            }
            continue;
        }
        // Series of like length share the kernel's steps.
        batch.sort_by_key(|w| std::cmp::Reverse(w.prepared.working.observed.len()));
        for (index, result) in fit_batch(models.of(&structure), batch, request, smoothed, workspace) {
            results[index] = Some(result);
        }
    }
    let lost = || Err(Trouble::Numerical { what: "the series was lost among others; please report it" });
    results.into_iter().map(|result| result.unwrap_or_else(lost)).collect()
}

/// A series that waits for a lane.
#[derive(Debug)]
struct Waiting {
    /// Where its result goes.
    index: usize,
    prepared: Prepared,
    power_estimated: bool,
}

/// The models of the structures that have come up: series of one request seldom have more than one.
#[derive(Debug, Default)]
struct Models(Vec<(Structure, Model)>);

impl Models {
    fn of(&mut self, structure: &Structure) -> &Model {
        let at = self.0.iter().position(|(known, _)| known == structure).unwrap_or_else(|| {
            self.0.push((structure.clone(), structure.model()));
            self.0.len() - 1
        });
        &self.0[at].1
    }
}

/// Examines and prepares one series. True beside it: the power of its transform was estimated.
fn ready(
    series: &Series,
    request: &Request,
    models: &mut Models,
    workspace: &mut Workspace,
) -> Result<(Prepared, bool), Trouble> {
    fit::examine(&series.observed)?;
    let mut choice = choose::choose(request, &series.observed)?;
    let power_estimated = choice.power_open;
    if power_estimated {
        let power = box_cox::power(series, request, &choice, workspace)?;
        choice = Choice { transform: Transform::BoxCox(power), ..choice };
    }
    let model = models.of(&choice.structure);
    Ok((fit::prepare(series, request, &choice, model, workspace)?, power_estimated))
}

/// Fits series of one structure, that of `model`, and tells with each result whose it is.
fn fit_batch(
    model: &Model,
    batch: Vec<Waiting>,
    request: &Request,
    smoothed: bool,
    workspace: &mut Workspace,
) -> Vec<(usize, Result<Fit, Trouble>)> {
    let instructions = workspace.instructions;
    let asked = (request, smoothed, instructions);
    match &mut workspace.lanes {
        LaneBuffers::Baseline(buffers) => fit_in_lanes(model, batch, asked, buffers),
        #[cfg(target_arch = "x86_64")]
        LaneBuffers::Avx2(buffers) => fit_in_lanes(model, batch, asked, buffers),
        #[cfg(target_arch = "x86_64")]
        LaneBuffers::Avx512(buffers) => fit_in_lanes(model, batch, asked, buffers),
    }
}

/// [`fit_batch`] in certain registers.
fn fit_in_lanes<V: Width>(
    model: &Model,
    batch: Vec<Waiting>,
    (request, smoothed, instructions): (&Request, bool, Instructions),
    buffers: &mut Buffers<V>,
) -> Vec<(usize, Result<Fit, Trouble>)> {
    let mut model = model.clone();
    let system = model.system();
    let taken = std::mem::take(buffers);
    let mut kernel: Kernel<V> = Kernel::new(&model, &system, request.drifting_drivers.len(), taken);
    let estimates = lockstep::maximise(&mut kernel, &mut model, &batch, instructions);
    let mut out = Vec::with_capacity(batch.len());
    let mut estimated = Vec::with_capacity(batch.len());
    for (waiting, estimate) in batch.into_iter().zip(estimates) {
        match estimate {
            Ok(estimate) => estimated.push((waiting, estimate)),
            Err(error) => out.push((waiting.index, Err(fit::trouble_of(error, &model, request)))),
        }
    }
    let functionals: Arc<[_]> =
        if smoothed { components::of_components(&model, &system).into() } else { Arc::new([]) };
    let shared = Arc::new(model.clone());
    while !estimated.is_empty() {
        let together: Vec<_> = estimated.drain(..estimated.len().min(MOST_LANES)).collect();
        let systems: Vec<_> = (0..MOST_LANES)
            .map(|lane| match together.get(lane) {
                Some((waiting, estimate)) => {
                    kernel.data.load(lane, &waiting.prepared.working);
                    let mut system = system.clone();
                    let stationary = model.fill(&estimate.values, &mut system).is_ok();
                    kernel.set_lane(lane, &model, &system);
                    stationary.then_some(system)
                }
                None => {
                    kernel.data.unload(lane);
                    None
                }
            })
            .collect();
        let mut evaluations = Vec::with_capacity(together.len());
        let mut evaluate = |pass: &Pass<V>| {
            for (lane, (waiting, _)) in together.iter().enumerate() {
                let system = systems[lane].clone().ok_or(EvaluationError::NotStationary);
                let series = waiting.prepared.working.clone();
                evaluations.push(
                    system.and_then(|s| Evaluation::of_lane(pass, lane, Arc::clone(&shared), s, series)),
                );
            }
        };
        if smoothed {
            kernel.smooth(&functionals, shared.level(), evaluate);
            for (lane, evaluation) in evaluations.iter_mut().enumerate() {
                if let Ok(evaluation) = evaluation {
                    let len = kernel.data.lengths[lane];
                    evaluation.remember(&functionals, kernel.buffers.smoother.lane(lane, len));
                }
            }
        } else {
            kernel.filter(Keep::Ends);
            evaluate(&kernel.buffers.pass);
        }
        for ((waiting, estimate), evaluation) in together.into_iter().zip(evaluations) {
            let Waiting { index, prepared, power_estimated } = waiting;
            let result = evaluation
                .map_err(|error| fit::trouble_of(error, &shared, request))
                .and_then(|evaluation| fit::finish(prepared, request, estimate, evaluation))
                .map(|fit| fit.with_power(power_estimated));
            out.push((index, result));
        }
    }
    *buffers = kernel.buffers;
    out
}
