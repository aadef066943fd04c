//! The stages of a search: a climb from the start that the approximate likelihood names, a look at where else the maximum may lie, and a second look
//! where no climb ended. Where there is no approximate likelihood (cycles, autoregressions, drivers, matrices) a grid of exact ones names the starts.

use super::approach::{self, Optimum, Place};
use super::climb::{Climb, LAST_GAIN};
use super::layout::Layout;
use super::spectrum::Spectrum;
use super::{Answer, Estimate, Question};
use crate::evaluation::EvaluationError;
use crate::instructions::Instructions;
use crate::starts::Starts;
use crate::structure::Model;

/// Where a search stands.
#[derive(Debug, Clone)]
enum Stage {
    /// Nothing is open: one evaluation at the values that are known.
    Known(Vec<f64>),
    /// The starts are compared.
    Starts,
    /// A climb from a start.
    Climb(Climb),
    /// A look at where another optimum may lie.
    Rival(Climb),
    /// A climb with one variance less, for a best climb that did not end.
    Without(Climb),
    Done,
}

/// A search for the maximum of one likelihood that it does not own: it asks and is told.
#[derive(Debug, Clone)]
pub(crate) struct Search {
    layout: Layout,
    starts: Starts,
    stage: Stage,
    /// The approximate likelihood, where there is one, and its optima.
    spectrum: Option<(Spectrum, Vec<Optimum>)>,
    /// Starts that are still to be climbed from, the last one first.
    waiting: Vec<Vec<f64>>,
    /// Where another optimum may lie, the last one first.
    rivals: Vec<Place>,
    /// Variances that are still to be left out, the last one first.
    leaving: Vec<usize>,
    best: Option<Climb>,
    known: Option<Estimate>,
    trouble: Option<EvaluationError>,
    evaluations: usize,
}

impl Search {
    /// A search for the parameters of `model` that `known` leaves open (`None`). `observed`: the series, for the starts; `instructions`
    /// to find them with, which change nothing but the time.
    pub(crate) fn new(
        model: &Model,
        known: &[Option<f64>],
        observed: &[f64],
        instructions: Instructions,
    ) -> Self {
        let (layout, starts) = (Layout::new(model, known), Starts::new(model, known, observed));
        let (mut stage, mut spectrum) = (Stage::Starts, None);
        if known.iter().all(Option::is_some) {
            stage = Stage::Known(known.iter().map(|k| k.unwrap_or(0.0)).collect());
        } else if let Some(mut approximate) = Spectrum::new(model, observed, instructions) {
            let optima = approach::optima(&mut approximate, &layout, starts.grid(), starts.scale);
            if let Some((_, start)) = optima.first() {
                stage = Stage::Climb(Climb::new(start.clone(), None, LAST_GAIN));
                spectrum = Some((approximate, optima));
            }
        }
        Self {
            layout,
            starts,
            stage,
            spectrum,
            waiting: Vec::new(),
            rivals: Vec::new(),
            leaving: Vec::new(),
            best: None,
            known: None,
            trouble: None,
            evaluations: 0,
        }
    }

    /// The next question; `None` when the search has ended.
    pub(crate) fn ask(&self) -> Option<Question<'_>> {
        match &self.stage {
            Stage::Known(values) => Some(Question { values, derivatives: false }),
            Stage::Starts => self.starts.ask(),
            Stage::Climb(climb) | Stage::Rival(climb) | Stage::Without(climb) => climb.ask(),
            Stage::Done => None,
        }
    }

    /// Takes the answer to the last question.
    pub(crate) fn tell(&mut self, answer: Result<Answer<'_>, EvaluationError>) {
        self.evaluations += 1;
        match &mut self.stage {
            Stage::Known(values) => {
                match answer {
                    Ok(answer) => {
                        self.known = Some(Estimate {
                            std_errors: vec![f64::NAN; values.len()],
                            values: std::mem::take(values),
                            log_likelihood: answer.log_likelihood,
                            converged: true,
                            evaluations: 1,
                        });
                    }
                    Err(error) => self.trouble = Some(error),
                }
                self.stage = Stage::Done;
            }
            Stage::Starts => {
                self.starts.tell(answer);
                if self.starts.ask().is_none() {
                    match self.starts.best() {
                        Ok(starts) => self.waiting = starts,
                        Err(error) => self.trouble = Some(error),
                    }
                    self.waiting.reverse();
                    self.next_climb();
                }
            }
            Stage::Climb(climb) => {
                climb.tell(&self.layout, answer);
                if climb.ask().is_none() {
                    self.keep_better();
                    if self.best.is_none() && self.waiting.is_empty() && self.starts.untouched() {
                        // The exact likelihood knows none of the approximate one's optima.
                        self.stage = Stage::Starts;
                    } else {
                        self.next_climb();
                    }
                }
            }
            Stage::Rival(climb) => {
                climb.tell(&self.layout, answer);
                if climb.ask().is_none() {
                    self.judge_rival();
                }
            }
            Stage::Without(climb) => {
                climb.tell(&self.layout, answer);
                if climb.ask().is_none() {
                    self.keep_as_good();
                    self.next_without();
                }
            }
            Stage::Done => {}
        }
    }

    /// The estimate, once nothing is asked any more.
    ///
    /// # Errors
    /// When the likelihood could not be evaluated at any start.
    pub(crate) fn finish(self) -> Result<Estimate, EvaluationError> {
        if let Some(trouble) = self.trouble {
            return Err(trouble);
        }
        if let Some(known) = self.known {
            return Ok(known);
        }
        let best = self.best.ok_or(EvaluationError::NotPositive)?;
        Ok(Estimate {
            std_errors: best.std_errors(&self.layout),
            log_likelihood: best.point.log_likelihood,
            converged: best.converged,
            values: best.point.values,
            evaluations: self.evaluations,
        })
    }

    fn next_climb(&mut self) {
        if let Some(start) = self.waiting.pop() {
            self.stage = Stage::Climb(Climb::new(start, None, LAST_GAIN));
            return;
        }
        if let (Some((spectrum, optima)), Some(best)) = (&mut self.spectrum, &self.best) {
            self.rivals = approach::rivals(spectrum, &self.layout, &best.point.values, optima);
        }
        self.next_rival();
    }

    fn next_rival(&mut self) {
        if let (Some(place), Some(best)) = (self.rivals.pop(), &self.best) {
            let climb = Climb::new(place.values, place.held, LAST_GAIN);
            self.stage = Stage::Rival(climb.above(best.point.log_likelihood));
            return;
        }
        if let Some(best) = self.best.as_ref().filter(|best| !best.converged) {
            self.leaving = best.falling(&self.layout);
            self.leaving.reverse();
        }
        self.next_without();
    }

    /// A rival that is higher climbs on with nothing held, and is the best from then on.
    fn judge_rival(&mut self) {
        let Stage::Rival(mut climb) = std::mem::replace(&mut self.stage, Stage::Done) else { return };
        let than = self.best.as_ref().map_or(f64::NEG_INFINITY, |best| best.point.log_likelihood);
        if climb.point.log_likelihood > than + 1e-9 {
            if climb.go_on(&self.layout) {
                self.stage = Stage::Rival(climb);
                return;
            }
            self.best = Some(climb);
        }
        self.next_rival();
    }

    /// A climb that did not end may creep along a ridge towards a variance of zero, where the other parameters would have to move
    /// too before the likelihood is higher. Each variance that still falls is held at zero in turn, the others climb, and the best of
    /// all is taken.
    fn next_without(&mut self) {
        self.stage = match (self.leaving.pop(), &self.best) {
            (Some(i), Some(best)) => {
                let mut values = best.point.values.clone();
                values[i] = 0.0;
                Stage::Without(Climb::new(values, Some(i), LAST_GAIN))
            }
            _ => Stage::Done,
        };
    }

    fn keep_better(&mut self) {
        let Stage::Climb(climb) = std::mem::replace(&mut self.stage, Stage::Done) else { return };
        let than = self.best.as_ref().map_or(f64::NEG_INFINITY, |best| best.point.log_likelihood);
        if climb.point.log_likelihood > than {
            self.best = Some(climb);
        }
    }

    fn keep_as_good(&mut self) {
        let Stage::Without(climb) = std::mem::replace(&mut self.stage, Stage::Done) else { return };
        let Some(best) = &self.best else { return };
        let as_good = climb.point.log_likelihood >= best.point.log_likelihood - 1e-9;
        if climb.point.log_likelihood > best.point.log_likelihood
            || as_good && climb.converged && !best.converged
        {
            self.best = Some(climb);
        }
    }
}
