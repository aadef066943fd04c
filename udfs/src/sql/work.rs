//! The work on one chunk of series: put each on its grid, fit them, write their rows.
//!
//! Runs on a blocking thread. The core gets as many series at once as memory allows, because it is quickest when it
//! can advance several in lock step. A series in trouble becomes rows that say so; a panic inside a fit is such a
//! trouble too, of that series alone. Nothing here depends on which series share a chunk or a thread.

use std::collections::VecDeque;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};

use datafusion::arrow::array::RecordBatch;
use datafusion::common::stats::Precision;
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::memory_pool::{MemoryLimit, MemoryPool, MemoryReservation};
use datafusion::physical_plan::ExecutionPlan;
use datafusion::physical_plan::sorts::sort::SortExec;
use datafusion::physical_plan::statistics::{StatisticsArgs, StatisticsContext};
use stillwell_statespace::{
    Components, Diagnostics, Fit, Forecast, GeneralFit, GeneralForm, Trouble, Workspace,
};

use super::arguments::settings::Settings;
use super::error::failed_series;
use super::fitting::{fitted, fitted_together, guarded, message};
use super::function::Function;
use super::metrics::StructuralMetrics;
use super::progress::{Progress, TroubledSeries};
use crate::columns::groups::Group;
use crate::columns::result::{ResultRows, ResultSchema};
use crate::columns::series::{Placed, Placer, Unplaced};
use crate::columns::time::TimeKind;
use crate::columns::{components_rows, diagnostics_rows, forecast_rows, state_space_rows};

/// Series that are fitted at once, at most: enough that the lanes of the core seldom run dry.
const TOGETHER: usize = 256;
/// Bytes that they may take together where memory has no limit, unless one takes more alone.
const TOGETHER_BYTES: usize = 32 << 20;

/// Bytes that one worker may take.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Room {
    /// For the rows of a chunk and their result.
    pub(crate) rows: usize,
    /// For fits.
    pub(crate) fits: usize,
}

impl Room {
    /// The room of one of so many workers. Of a limited memory most is left to what sorts and writes meanwhile.
    pub(crate) fn of(pool: &dyn MemoryPool, workers: usize) -> Self {
        let share = |one_in: usize| match pool.memory_limit() {
            MemoryLimit::Finite(limit) => TOGETHER_BYTES.min(limit / one_in / workers.max(1)),
            _ => TOGETHER_BYTES,
        };
        Self { rows: share(32), fits: share(16) }
    }
}

/// Series that are in the kernel at once; each has a share in its buffers.
const IN_KERNEL: usize = 8;

/// Bytes that a fit keeps per grid point: the series on two scales, its one-step errors, its smoothed components.
const KEPT_BYTES: usize = 16 * size_of::<f64>();

/// Bytes that the kernel takes per grid point of a series with this many states: packed covariances, columns of the diffuse states up to their
/// collapse, gains, cumulants.
fn kernel_bytes(states: usize) -> usize {
    size_of::<f64>() * (states * states + 8 * states + 32)
}

/// What the rows of a series have become.
type PlacedGroup = Result<Placed, Unplaced>;

/// What the functions answer about a series.
type Solved = Result<Answer, Trouble>;

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
    /// What one worker may take.
    pub(crate) room: Room,
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
    /// Once rows arrive from a sort, everything has been read: the rows that went into it are all there are. Without a
    /// sort it is the statistics of the files that may know.
    fn rows(&self) -> Option<usize> {
        let Some(sort) = self.input.downcast_ref::<SortExec>() else {
            let known = StatisticsContext::new().compute(self.input.as_ref(), &StatisticsArgs::new());
            return match known.ok()?.num_rows {
                Precision::Exact(rows) => Some(rows),
                _ => None,
            };
        };
        let mut plan = sort.input();
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
        let settings = &self.job.settings;
        let mut workspace = self.take_workspace();
        let mut rows = ResultRows::new(Arc::clone(&self.job.result), self.job.time.clone());
        let mut placer = Placer::new(&self.job.time, settings.every, settings.request.drivers.len());
        let mut left = groups.iter().map(|group| (group, placer.place(group))).peekable();
        while left.peek().is_some() {
            if self.cancelled.load(Ordering::Relaxed) {
                return Err(DataFusionError::Execution("the query was cancelled".to_string()));
            }
            let mut held = Held { memory, fits: 0 };
            let mut batch: Vec<(&Group, PlacedGroup)> = Vec::new();
            while let Some(next) =
                left.next_if(|(group, placed)| self.takes(group, placed, batch.len(), &mut held))
            {
                batch.push(next);
            }
            if batch.is_empty()
                && let Some((group, placed)) = left.next()
            {
                // One that has no room beside others must have it alone.
                held.grow(self.bytes(group, &placed, 0))?;
                batch.push((group, placed));
            }
            let solved = {
                let _time = self.metrics.time_in_fits.timer();
                self.solve_batch(&batch, &mut workspace)
            };
            for ((group, placed), solved) in batch.iter().zip(solved) {
                self.finish(group, placed, &solved, &mut rows)?;
            }
        }
        self.spare.lock().unwrap_or_else(PoisonError::into_inner).push(workspace);
        Ok(rows.finish()?)
    }

    fn take_workspace(&self) -> Workspace {
        let spare = self.spare.lock().unwrap_or_else(PoisonError::into_inner).pop();
        spare.unwrap_or_default()
    }

    /// Bytes of the fit of the next series of a batch of `count` and, where its grid is far longer than the rows on it, of its result.
    fn bytes(&self, group: &Group, placed: &PlacedGroup, count: usize) -> Bytes {
        let Ok(placed) = placed else { return Bytes::default() };
        let in_kernel = if count < IN_KERNEL { kernel_bytes(self.job.settings.usual_states()) } else { 0 };
        let more_rows = placed.len().saturating_sub(group.len());
        Bytes {
            fit: placed.len() * (KEPT_BYTES + in_kernel),
            rows: more_rows * self.job.result.schema().fields().len() * size_of::<f64>(),
        }
    }

    /// Takes the next series into a batch of `count` that holds memory already, if it has room.
    fn takes(&self, group: &Group, placed: &PlacedGroup, count: usize, held: &mut Held<'_>) -> bool {
        let most = if self.job.settings.fits_together() { TOGETHER } else { 1 };
        let bytes = self.bytes(group, placed, count);
        count < most && (count == 0 || held.fits + bytes.fit <= self.room.fits) && held.grow(bytes).is_ok()
    }

    /// Fits the series of a batch and asks the fits.
    fn solve_batch(&self, batch: &[(&Group, PlacedGroup)], workspace: &mut Workspace) -> Vec<Solved> {
        let settings = &self.job.settings;
        let placed = batch.iter().filter_map(|(_, placed)| placed.as_ref().ok()).collect::<Vec<_>>();
        let mut solved: VecDeque<Solved> = if let Some(form) = &settings.form {
            let solve = |placed| guarded(workspace, |workspace| self.solve_general(form, placed, workspace));
            placed.into_iter().map(solve).collect()
        } else if settings.fits_together() {
            let fits = fitted_together(&placed, settings, self.smooths(), workspace);
            fits.into_iter().map(|fit| guarded(workspace, |_| self.solve(fit?))).collect()
        } else {
            let solve = |placed| fitted(placed, settings, workspace, |fit| self.solve(fit));
            placed.into_iter().map(solve).collect()
        };
        let answer = |(_, placed): &(&Group, PlacedGroup)| match placed {
            Ok(_) => solved.pop_front().unwrap_or(Err(Trouble::Numerical {
                what: "the fit was not handed back; please report the series",
            })),
            Err(unplaced) => Err(unplaced.trouble.clone()),
        };
        batch.iter().map(answer).collect()
    }

    /// Whether [`Self::solve`] looks at smoothed states.
    fn smooths(&self) -> bool {
        match self.job.function {
            Function::Components | Function::StateSpace => true,
            Function::Forecast => false,
            Function::Diagnostics => self.has_drivers(),
        }
    }

    fn has_drivers(&self) -> bool {
        let request = &self.job.settings.request;
        !request.drivers.is_empty() || !request.drifting_drivers.is_empty()
    }

    /// Counts a series and writes its rows.
    fn finish(
        &self,
        group: &Group,
        placed: &PlacedGroup,
        solved: &Solved,
        rows: &mut ResultRows,
    ) -> Result<()> {
        match (solved, placed) {
            (Ok(answer), Ok(placed)) => {
                self.record(group, None);
                self.write(group, placed, answer, rows);
            }
            (Err(trouble), _) | (_, Err(Unplaced { trouble, .. })) => {
                let message = message(trouble, placed.as_ref().ok());
                if self.job.settings.fail {
                    let key = group.key.describe(&self.job.key_names);
                    return Err(failed_series(self.job.function, &key, trouble, &message));
                }
                self.record(group, Some((trouble, &message)));
                self.write_trouble(group, placed, (trouble, &message), rows);
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
                let components =
                    if self.has_drivers() { Some(fit.components(settings.coverage)?) } else { None };
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
        placed: &PlacedGroup,
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

/// What one series takes.
#[derive(Debug, Clone, Copy, Default)]
struct Bytes {
    fit: usize,
    rows: usize,
}

/// Memory of fits, given back when they are over. That of rows stays taken until the chunk is through.
struct Held<'a> {
    memory: &'a MemoryReservation,
    fits: usize,
}

impl Held<'_> {
    fn grow(&mut self, bytes: Bytes) -> Result<()> {
        self.memory.try_grow(bytes.fit + bytes.rows)?;
        self.fits += bytes.fit;
        Ok(())
    }
}

impl Drop for Held<'_> {
    fn drop(&mut self) {
        self.memory.shrink(self.fits);
    }
}

#[cfg(test)]
mod tests;
