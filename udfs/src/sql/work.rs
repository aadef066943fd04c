//! The work on one chunk of series: put each on its grid, fit it, write its rows.
//!
//! Runs on a blocking thread. A series in trouble becomes rows that say so; a panic inside a fit is such a
//! trouble too, of that series alone. Nothing here depends on which series share a chunk or a thread.

use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};

use datafusion::arrow::array::RecordBatch;
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::memory_pool::MemoryReservation;
use datafusion::physical_plan::ExecutionPlan;
use datafusion::physical_plan::sorts::sort::SortExec;
use stillwell_statespace::{
    Components, Diagnostics, Fit, Forecast, GeneralFit, GeneralForm, Trouble, Workspace,
};

use super::arguments::settings::Settings;
use super::error::failed_series;
use super::fitting::{fitted, guarded, message};
use super::function::Function;
use super::metrics::StructuralMetrics;
use super::progress::{Progress, TroubledSeries};
use crate::columns::groups::Group;
use crate::columns::result::{ResultRows, ResultSchema};
use crate::columns::series::{Placed, Unplaced, place};
use crate::columns::time::TimeKind;
use crate::columns::{components_rows, diagnostics_rows, forecast_rows, state_space_rows};

/// Bytes that a fit takes per grid point while it lasts, roughly: a packed covariance, gains and smoothed
/// states of a structure with some ten states.
const FIT_BYTES: usize = 1_024;

/// What is to be done with every series. Plain data.
#[derive(Debug, Clone)]
pub(crate) struct Job {
    pub(crate) function: Function,
    pub(crate) settings: Settings,
    pub(crate) time: TimeKind,
    pub(crate) key_names: Vec<String>,
    pub(crate) result: Arc<ResultSchema>,
}

/// What the threads of one partition share.
#[derive(Debug)]
pub(crate) struct Workshop {
    pub(crate) job: Arc<Job>,
    pub(crate) metrics: StructuralMetrics,
    pub(crate) progress: Option<Arc<Progress>>,
    /// Set when nobody waits for the result any more.
    pub(crate) cancelled: Arc<AtomicBool>,
    /// Tells the host how many rows will come, once for all partitions.
    pub(crate) announcement: Announcement,
    /// Buffers between two chunks, one per thread that has worked here.
    pub(crate) spare: Mutex<Vec<Workspace>>,
}

/// What a fitted series answers with.
#[derive(Debug)]
enum Answer {
    Components(Components),
    Forecast(Forecast),
    Diagnostics { fit: Box<Fit>, diagnostics: Diagnostics, components: Option<Components> },
    StateSpace(GeneralFit),
}

/// How many rows the operator will get, told when they are known.
#[derive(Debug, Clone)]
pub(crate) struct Announcement {
    pub(crate) input: Arc<dyn ExecutionPlan>,
    pub(crate) done: Arc<AtomicBool>,
}

impl Announcement {
    /// Once rows arrive from a sort, everything has been read: the rows that went into it are all there are.
    fn rows(&self) -> Option<usize> {
        let mut plan = self.input.downcast_ref::<SortExec>()?.input();
        loop {
            match plan.metrics().and_then(|metrics| metrics.output_rows()) {
                Some(rows) => return Some(rows),
                None => plan = plan.children().into_iter().next()?,
            }
        }
    }
}

impl Workshop {
    /// The first rows of a partition are there.
    pub(crate) fn announce(&self) {
        if let Some(progress) = &self.progress
            && !self.announcement.done.swap(true, Ordering::Relaxed)
            && let Some(rows) = self.announcement.rows()
        {
            progress.expect(rows);
        }
    }

    /// Works through a chunk.
    ///
    /// # Errors
    /// A series in trouble under `on_trouble => 'fail'`; cancellation; a series too long for the memory pool,
    /// of which `memory` is a part; result columns that cannot be built.
    pub(crate) fn answer(&self, groups: &[Group], memory: &MemoryReservation) -> Result<RecordBatch> {
        let mut workspace = self.take_workspace();
        let mut rows = ResultRows::new(Arc::clone(&self.job.result), self.job.time.clone());
        for group in groups {
            if self.cancelled.load(Ordering::Relaxed) {
                return Err(DataFusionError::Execution("the query was cancelled".to_string()));
            }
            self.one(group, &mut workspace, &mut rows, memory)?;
        }
        self.spare.lock().unwrap_or_else(PoisonError::into_inner).push(workspace);
        Ok(rows.finish()?)
    }

    fn take_workspace(&self) -> Workspace {
        let spare = self.spare.lock().unwrap_or_else(PoisonError::into_inner).pop();
        spare.unwrap_or_default()
    }

    /// One series, from its rows to the rows of the result.
    fn one(
        &self,
        group: &Group,
        workspace: &mut Workspace,
        rows: &mut ResultRows,
        memory: &MemoryReservation,
    ) -> Result<()> {
        let settings = &self.job.settings;
        let request = &settings.request;
        let placed = place(group, &self.job.time, settings.every, request.drivers.len());
        let solved = match &placed {
            Ok(placed) => {
                // A grid can be far longer than the rows on it.
                let for_rows =
                    placed.len().saturating_sub(group.len()) * self.job.result.schema().fields().len();
                let for_fit = placed.len() * FIT_BYTES;
                memory.try_grow(for_fit + for_rows * size_of::<f64>())?;
                let _held = Held { memory, bytes: for_fit };
                let _time = self.metrics.time_in_fits.timer();
                match &settings.form {
                    Some(form) => guarded(workspace, |workspace| self.solve_general(form, placed, workspace)),
                    None => fitted(placed, settings, workspace, |fit| self.solve(fit)),
                }
            }
            Err(unplaced) => Err(unplaced.trouble.clone()),
        };
        match (&solved, &placed) {
            (Ok(answer), Ok(placed)) => {
                self.record(group, None);
                self.write(group, placed, answer, rows);
            }
            (Err(trouble), _) | (_, Err(Unplaced { trouble, .. })) => {
                let message = message(trouble, placed.as_ref().ok());
                if settings.fail {
                    let key = group.key.describe(&self.job.key_names);
                    return Err(failed_series(self.job.function, &key, trouble, &message));
                }
                self.record(group, Some((trouble, &message)));
                self.write_trouble(group, &placed, (trouble, &message), rows);
            }
        }
        Ok(())
    }

    /// Asks a fit what the function wants to know.
    fn solve(&self, fit: Fit) -> Result<Answer, Trouble> {
        let settings = &self.job.settings;
        self.metrics.likelihood_evaluations.add(fit.evaluations());
        match self.job.function {
            Function::Components => fit.components(settings.coverage).map(Answer::Components),
            Function::Forecast => fit.forecast(settings.horizon, settings.coverage).map(Answer::Forecast),
            Function::Diagnostics => {
                let diagnostics = fit.diagnostics();
                let has_drivers =
                    !settings.request.drivers.is_empty() || !settings.request.drifting_drivers.is_empty();
                let components = if has_drivers { Some(fit.components(settings.coverage)?) } else { None };
                Ok(Answer::Diagnostics { fit: Box::new(fit), diagnostics, components })
            }
            Function::StateSpace => Err(Trouble::Numerical {
                what: "the system was not handed to the operator; please report the query",
            }),
        }
    }

    /// Fits a system given as matrices, up to the last row: points after the last observation are forecasts.
    fn solve_general(
        &self,
        form: &GeneralForm,
        placed: &Placed,
        workspace: &mut Workspace,
    ) -> Result<Answer, Trouble> {
        let mut series = placed.series.clone();
        series.observed.extend(std::iter::repeat_n(f64::NAN, placed.tail()));
        let fit = form.fit(&series, self.job.settings.coverage, workspace)?;
        self.metrics.likelihood_evaluations.add(fit.evaluations);
        Ok(Answer::StateSpace(fit))
    }

    fn record(&self, group: &Group, trouble: Option<(&Trouble, &str)>) {
        match trouble {
            None => self.metrics.series_fitted.add(1),
            Some(_) => self.metrics.series_in_trouble.add(1),
        }
        if let Some(progress) = &self.progress {
            let describe = trouble.map(|(trouble, message)| {
                || TroubledSeries {
                    series: group.key.describe(&self.job.key_names),
                    function: self.job.function.name(),
                    status: trouble.status(),
                    message: message.to_string(),
                }
            });
            progress.record(group.len(), describe);
        }
    }

    fn write(&self, group: &Group, placed: &Placed, answer: &Answer, rows: &mut ResultRows) {
        let request = &self.job.settings.request;
        let drivers = request.drivers.iter().chain(&request.drifting_drivers).collect::<Vec<_>>();
        match answer {
            Answer::Components(components) => {
                components_rows::write(rows, &group.key, placed, components, &drivers);
            }
            Answer::StateSpace(fit) => state_space_rows::write(rows, &group.key, placed, fit),
            Answer::Forecast(forecast) => {
                let parts = (self.job.settings.parts, drivers.as_slice());
                forecast_rows::write(rows, &group.key, placed, forecast, parts);
            }
            Answer::Diagnostics { fit, diagnostics, components } => {
                let findings = diagnostics_rows::Findings {
                    structure: fit.structure(),
                    transform: fit.transform(),
                    parameters: fit.parameters(),
                    diagnostics,
                    components: components.as_ref(),
                };
                let names = (drivers.as_slice(), request.drifting_drivers.as_slice());
                diagnostics_rows::write(rows, &group.key, placed, &findings, names);
            }
        }
    }

    fn write_trouble(
        &self,
        group: &Group,
        placed: &Result<Placed, Unplaced>,
        (trouble, message): (&Trouble, &str),
        rows: &mut ResultRows,
    ) {
        match self.job.function {
            Function::Components | Function::StateSpace => {
                components_rows::write_trouble(rows, group, trouble);
            }
            Function::Forecast => {
                let grid = match placed {
                    Ok(placed) => Some((placed.grid(), placed.last_point())),
                    Err(Unplaced { grid, .. }) => {
                        grid.as_deref().map(|(grid, points)| (grid, points.saturating_sub(1)))
                    }
                };
                forecast_rows::write_trouble(rows, &group.key, self.job.settings.horizon, grid, trouble);
            }
            Function::Diagnostics => {
                diagnostics_rows::write_trouble(rows, group, placed.as_ref().ok(), (trouble, message));
            }
        }
    }
}

/// Memory that is given back when the fit is over.
struct Held<'a> {
    memory: &'a MemoryReservation,
    bytes: usize,
}

impl Drop for Held<'_> {
    fn drop(&mut self) {
        self.memory.shrink(self.bytes);
    }
}

#[cfg(test)]
mod tests;
