//! Searches in lock step: each asks for a likelihood at a point of its own, and all are evaluated at once.

use super::Waiting;
use crate::estimate::{Answer, Estimate, Search};
use crate::evaluation::EvaluationError;
use crate::filter::Keep;
use crate::instructions::Instructions;
use crate::kernel::{Buffers, Kernel, Width};
use crate::lanes::{MOST_LANES, Mask};
use crate::structure::Model;
use crate::system::System;

/// A lane at work.
struct Seat {
    /// Whose search it is.
    series: usize,
    search: Search,
}

/// Estimates every series; the results stand in their order. `model` is scratch for parameter values.
pub(super) fn maximise<V: Width>(
    kernel: &mut Kernel<V>,
    model: &mut Model,
    batch: &[Waiting],
    instructions: Instructions,
) -> Vec<Result<Estimate, EvaluationError>> {
    let mut results: Vec<Option<Result<Estimate, EvaluationError>>> = batch.iter().map(|_| None).collect();
    let mut next = 0;
    let mut seats: [Option<Seat>; MOST_LANES] = Default::default();
    let mut system = model.system();
    let (mut gradient, mut information) = (Vec::new(), Vec::new());
    loop {
        let (mut asked, mut derivatives) = (Mask::NONE, Mask::NONE);
        for lane in 0..MOST_LANES {
            let wants = loop {
                let Some(seat) = &mut seats[lane] else {
                    if next == batch.len() {
                        if kernel.data.lengths[lane] > 0 {
                            kernel.data.unload(lane);
                        }
                        break None;
                    }
                    let prepared = &batch[next].prepared;
                    kernel.data.load(lane, &prepared.working);
                    let search =
                        Search::new(model, &prepared.known, &prepared.working.observed, instructions);
                    seats[lane] = Some(Seat { series: next, search });
                    next += 1;
                    continue;
                };
                match put(seat, lane, kernel, (model, &mut system)) {
                    Put::Asked { derivatives } => break Some(derivatives),
                    Put::Ended => {
                        if let Some(Seat { series, search }) = seats[lane].take() {
                            results[series] = Some(search.finish());
                        }
                    }
                }
            };
            if let Some(with) = wants {
                asked |= Mask::only(lane);
                if with {
                    derivatives |= Mask::only(lane);
                }
            }
        }
        if asked.is_none() {
            break;
        }
        if derivatives.is_none() {
            kernel.filter(Keep::Likelihood);
        } else {
            kernel.score();
        }
        let Buffers { pass, score, information: found, .. } = &kernel.buffers;
        for lane in asked.lanes() {
            let Some(seat) = &mut seats[lane] else { continue };
            gradient.clear();
            information.clear();
            if derivatives.holds(lane) {
                gradient.extend(score.gradient.iter().map(|g| g.lane(lane)));
                information.extend(found.matrix.iter().map(|h| h.lane(lane)));
            }
            seat.search.tell(pass.reached(lane).map_err(EvaluationError::from).map(|log_likelihood| {
                Answer {
                    log_likelihood,
                    rss: pass.rss(lane),
                    degrees: pass.observed[lane] as f64 - pass.elements as f64,
                    gradient: &gradient,
                    information: &information,
                }
            }));
        }
    }
    let missed = || Err(EvaluationError::NotPositive);
    results.into_iter().map(|result| result.unwrap_or_else(missed)).collect()
}

/// What became of a seat's next question.
enum Put {
    /// Its values stand in the lane.
    Asked { derivatives: bool },
    /// The search has ended.
    Ended,
}

/// Puts the next question of a search that can be evaluated into its lane.
fn put<V: Width>(
    seat: &mut Seat,
    lane: usize,
    kernel: &mut Kernel<V>,
    (model, system): (&mut Model, &mut System),
) -> Put {
    loop {
        let Some(question) = seat.search.ask() else { return Put::Ended };
        let derivatives = question.derivatives;
        if model.fill(question.values, system).is_ok() {
            kernel.set_lane(lane, model, system);
            return Put::Asked { derivatives };
        }
        seat.search.tell(Err(EvaluationError::NotStationary));
    }
}
