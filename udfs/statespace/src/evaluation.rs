//! A model at given parameter values, run over one series: likelihood, smoothed functions of the states, one-step
//! errors and forecasts, all on the scale of the series as handed in.

use std::sync::Arc;

use crate::filter::{End, FilterError, Keep, Pass};
use crate::forecast::{self, Step};
use crate::kernel::{Buffers, Kernel};
use crate::lanes::Real;
use crate::one_step::{self, OneStep};
use crate::request::Series;
use crate::results::State;
use crate::smoother::{Functional, Smoothed, Smoothing};
use crate::structure::{Model, Role};
use crate::system::System;

/// Why a model cannot be evaluated at these values on this series.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum EvaluationError {
    /// The data do not determine this diffuse element (states in order, then drivers).
    Undetermined(usize),
    /// An innovation variance is not positive (all variances zero, or values out of range).
    NotPositive,
    /// The structure reproduces the data to rounding.
    ExactFit,
    /// The parameters leave the stationary region.
    NotStationary,
}

impl std::fmt::Display for EvaluationError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Undetermined(element) => write!(f, "the data do not determine diffuse element {element}"),
            Self::NotPositive => write!(f, "an innovation variance is not positive"),
            Self::ExactFit => write!(f, "the structure reproduces the data to rounding"),
            Self::NotStationary => write!(f, "the parameters leave the stationary region"),
        }
    }
}

impl std::error::Error for EvaluationError {}

impl From<FilterError> for EvaluationError {
    fn from(error: FilterError) -> Self {
        match error {
            FilterError::Undetermined(element) => Self::Undetermined(element),
            FilterError::NotPositive(_) => Self::NotPositive,
        }
    }
}

/// One filtered series.
#[derive(Debug, Clone)]
pub struct Evaluation {
    model: Arc<Model>,
    system: System,
    series: Series,
    log_likelihood: f64,
    observed: usize,
    elements: usize,
    one_step: OneStep,
    end: End,
    /// What has been smoothed already.
    smoothed: Option<(Arc<[Functional]>, Smoothing)>,
}

impl Evaluation {
    /// Runs `model` at `values` (natural units, order of [`Model::parameters`]) over `series`.
    ///
    /// # Errors
    /// When the data leave a diffuse element open or the likelihood does not exist at these values.
    pub fn new(mut model: Model, values: &[f64], series: Series) -> Result<Self, EvaluationError> {
        let mut system = model.system();
        model.fill(values, &mut system).map_err(|_| EvaluationError::NotStationary)?;
        Self::with_system(model, system, series)
    }

    /// The same with a system of the caller's making that has the states of `model`.
    ///
    /// # Errors
    /// As [`Self::new`].
    pub fn with_system(model: Model, system: System, series: Series) -> Result<Self, EvaluationError> {
        let mut kernel = kernel_of(&model, &system, &series);
        kernel.filter(Keep::Ends);
        Self::of_lane(&kernel.buffers.pass, 0, Arc::new(model), system, series)
    }

    /// What the pass of a lane found, before its rows are whitened. The pass must have kept its ends.
    pub(crate) fn of_lane<V: Real>(
        pass: &Pass<V>,
        lane: usize,
        model: Arc<Model>,
        system: System,
        series: Series,
    ) -> Result<Self, EvaluationError> {
        Ok(Self {
            model,
            system,
            series,
            log_likelihood: pass.reached(lane)?,
            observed: pass.observed[lane],
            elements: pass.elements,
            one_step: one_step::errors(pass, lane),
            end: pass.end(lane),
            smoothed: None,
        })
    }

    /// Diffuse log-likelihood with `-(n - d)/2 log 2 pi`: n observed points, d diffuse elements, identity on them in
    /// the state basis.
    pub fn log_likelihood(&self) -> f64 {
        self.log_likelihood
    }

    /// Diffuse elements d.
    pub fn diffuse_elements(&self) -> usize {
        self.elements
    }

    /// Observed points.
    pub fn observed(&self) -> usize {
        self.observed
    }

    /// Standardised one-step errors.
    pub fn one_step(&self) -> &OneStep {
        &self.one_step
    }

    /// Score and average information at these values, natural units: gradient (p) and matrix (p x p row-major).
    pub fn score_and_information(&self) -> (Vec<f64>, Vec<f64>) {
        let mut kernel = kernel_of(&self.model, &self.system, &self.series);
        kernel.score();
        (kernel.buffers.score.gradient.clone(), kernel.buffers.information.matrix.clone())
    }

    /// Smoothed sum of the loads of one component (mean and standard error along the grid).
    pub fn component(&self, role: Role) -> Option<State> {
        let functional = Functional::of(role, &self.model, &self.system)?;
        let smoothing = self.smooth(&[functional]);
        smoothing.functionals.into_iter().next().map(State::from)
    }

    /// Smoothed signal: the observation without its irregular.
    pub fn signal(&self) -> State {
        self.smooth(&[Functional::Signal]).functionals.into_iter().next().map(State::from).unwrap_or_default()
    }

    /// Auxiliary residuals as t-values: of the irregular, and of the level's disturbance before each point.
    pub fn auxiliary_residuals(&self) -> (Vec<f64>, Vec<f64>) {
        let smoothing = self.smooth(&[]);
        (smoothing.outlier_t, smoothing.shift_t)
    }

    /// Coefficient of a constant driver and its standard error.
    pub fn coefficient(&self, driver: usize) -> (f64, f64) {
        let width = self.end.width;
        let row = &self.end.coefficients[driver * width..(driver + 1) * width];
        (row[0], row[1..].iter().map(|v| v * v).sum::<f64>().sqrt())
    }

    /// Forecast of `h` steps: mean of the observation, variance of the observation, variance of the signal. The series must
    /// hold drivers for them.
    pub fn forecast(&self, h: usize) -> (Vec<f64>, Vec<f64>, Vec<f64>) {
        let path = self.ahead(h, &[], None);
        let variance = path.signal.variance.iter().map(|v| v + self.system.h).collect();
        (path.signal.mean, variance, path.signal.variance)
    }

    pub(crate) fn smooth(&self, functionals: &[Functional]) -> Smoothing {
        if let Some((smoothed, smoothing)) = &self.smoothed
            && **smoothed == *functionals
        {
            return smoothing.clone();
        }
        let mut kernel = kernel_of(&self.model, &self.system, &self.series);
        kernel.smooth(functionals, self.model.level(), |_| {});
        kernel.buffers.smoother.lane(0, self.series.observed.len())
    }

    /// Keeps a smoothing for [`Self::smooth`].
    pub(crate) fn remember(&mut self, functionals: &Arc<[Functional]>, smoothing: Smoothing) {
        self.smoothed = Some((Arc::clone(functionals), smoothing));
    }

    pub(crate) fn ahead(
        &self,
        h: usize,
        functionals: &[Functional],
        joint: Option<&mut dyn FnMut(Step<'_>)>,
    ) -> forecast::Path {
        let from = forecast::From {
            system: &self.system,
            end: &self.end,
            drivers: &self.series.drivers,
            drifting: &self.series.drifting_drivers,
            first: self.series.observed.len(),
        };
        forecast::run(from, h, functionals, joint)
    }

    pub(crate) fn end(&self) -> &End {
        &self.end
    }

    pub(crate) fn model(&self) -> &Model {
        &self.model
    }

    pub(crate) fn system(&self) -> &System {
        &self.system
    }

    pub(crate) fn series(&self) -> &Series {
        &self.series
    }
}

/// One series in a kernel of one lane.
fn kernel_of(model: &Model, system: &System, series: &Series) -> Kernel<f64> {
    let mut kernel = Kernel::new(model, system, series.drifting_drivers.len(), Buffers::default());
    kernel.data.load(0, series);
    kernel
}

impl From<Smoothed> for State {
    fn from(smoothed: Smoothed) -> Self {
        Self { value: smoothed.mean, std_error: smoothed.variance.into_iter().map(f64::sqrt).collect() }
    }
}
