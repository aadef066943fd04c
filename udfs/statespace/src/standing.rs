//! Where a fitted series stands after its last observation: all that tomorrow needs of its past.
//!
//! The filtered state of the last point, its covariance, and the parameters are sufficient for everything that comes later (the Markov
//! property of DK eq. 3.1): forecasts run on from there, and new observations are filtered without touching the history or the
//! parameters. Coefficients of constant drivers are states that never move. The log-likelihood adds up, because it is a sum over
//! one-step predictions.
//!
//! Everything here is on the model scale in the data's own size. Only the level stands apart from a shift, so that series far from zero
//! keep their digits.

use crate::components::ForecastScale;
use crate::data::Data;
use crate::dynamics::{Dynamics, packed_at};
use crate::error::Trouble;
use crate::evaluation::Evaluation;
use crate::filter::{self, End, Keep, Pass};
use crate::fit::Fit;
use crate::forecast;
use crate::quantile::normal_quantile;
use crate::residual_checks as checks;
use crate::results::{Forecast, Parameter, State};
use crate::smoother::Smoothed;
use crate::structure::{Link, MAX_ORDER, Model, ParameterSpec, Role, Structure};
use crate::system::{Op, System};
use crate::transform::{LARGEST_POWER, Transform, Unit};

/// What is kept of a fit. All fields are plain, so that it can be written down and read back.
#[derive(Debug, Clone, PartialEq)]
pub struct Standing {
    /// The structure.
    pub structure: Structure,
    /// Names of the drivers with constant coefficients.
    pub drivers: Vec<String>,
    /// The scale of the model.
    pub transform: Transform,
    /// The power of the transform was estimated.
    pub power_estimated: bool,
    /// All parameters, model scale.
    pub parameters: Vec<Parameter>,
    /// What the level stands above: subtracted from the transformed observations; zero without a level.
    pub shift: f64,
    /// Filtered state of the last point (the level less `shift`), then the coefficients of the constant drivers.
    pub state: Vec<f64>,
    /// Its covariance: rows of the lower triangle, one after another.
    pub covariance: Vec<f64>,
    /// Grid points from the first to the last observation.
    pub points: usize,
    /// Observed points among them.
    pub n: usize,
    /// Diffuse elements.
    pub diffuse: usize,
    /// Diffuse log-likelihood of all observations so far, of the transformed data.
    pub log_likelihood: f64,
    /// The estimation met its stopping rule.
    pub converged: bool,
    /// Likelihood evaluations that took.
    pub evaluations: usize,
    /// The drivers after the last point as far as they are planned: constant coefficients first.
    pub plan: Vec<Vec<f64>>,
}

/// The components of the last point, each as its value and the standard error of that value; absent where the structure has no such component.
///
/// Units of the value are those of [`crate::Components`]. The standard error is in the same unit: under a transform it is of first order, so
/// beside a factor of 1.12 an error of 0.03 reads 12 % up, give or take 3 points.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct LastPoint {
    /// Level and its standard error, both in the data's unit.
    pub level: Option<(f64, f64)>,
    /// Slope per step and its standard error: the data's unit per step; growth per step (0.01 = 1 %) with `log` and `log1p`; the transformed scale
    /// per step with Box-Cox.
    pub slope: Option<(f64, f64)>,
    /// Sum of the seasonal patterns and its standard error: the data's unit; factors with `log` and `log1p`; the transformed scale with Box-Cox.
    pub seasonal: Option<(f64, f64)>,
    /// Cycle and its standard error, units as for `seasonal`.
    pub cycle: Option<(f64, f64)>,
    /// Autoregression and its standard error, units as for `seasonal`.
    pub autoregression: Option<(f64, f64)>,
}

impl Fit {
    /// Where the series stands after its last observation.
    pub fn standing(&self) -> Standing {
        let evaluation = &self.evaluation;
        let (unit, drivers) = (self.scaling.unit, self.drivers.0.len());
        let (mut state, mut covariance) = filtered_end(evaluation, drivers);
        let size = state.len();
        // To the data's own size: a drifting coefficient belongs to its driver as handed in.
        let specs = evaluation.model().state_specs();
        let factors: Vec<f64> = (0..size)
            .map(|i| match specs.get(i).map(|spec| spec.role) {
                Some(Role::Driver(driver)) => unit / self.scaling.drivers[driver],
                _ => unit,
            })
            .collect();
        for i in 0..size {
            state[i] *= factors[i];
            for j in 0..size {
                covariance[i * size + j] *= factors[i] * factors[j];
            }
        }
        let found = self.diagnostics();
        let n = self.modelled.len();
        Standing {
            structure: self.structure.clone(),
            drivers: self.drivers.0.clone(),
            transform: self.transform,
            power_estimated: self.power_estimated,
            parameters: self.parameters().to_vec(),
            shift: self.scaling.shift,
            state,
            covariance: packed(&covariance, size),
            points: n,
            n: found.n,
            diffuse: found.diffuse,
            log_likelihood: found.log_likelihood,
            converged: found.converged,
            evaluations: found.evaluations,
            plan: self.plan.iter().map(|column| column.get(n..).unwrap_or_default().to_vec()).collect(),
        }
    }
}

/// Mean and covariance of the last point's state given all observations, coefficients of constant drivers behind the states.
fn filtered_end(evaluation: &Evaluation, drivers: usize) -> (Vec<f64>, Vec<f64>) {
    let end = evaluation.end();
    let m = evaluation.model().states();
    let size = m + drivers;
    let rows: Vec<&[f64]> =
        end.state.chunks_exact(end.width).chain(end.coefficients.chunks_exact(end.width)).collect();
    let mut covariance = vec![0.0; size * size];
    for i in 0..size {
        for j in 0..=i {
            let white: f64 = rows[i][1..].iter().zip(&rows[j][1..]).map(|(a, b)| a * b).sum();
            let given = if i < m { end.covariance[i * m + j] } else { 0.0 };
            (covariance[i * size + j], covariance[j * size + i]) = (given + white, given + white);
        }
    }
    (rows.iter().map(|row| row[0]).collect(), covariance)
}

impl Standing {
    /// Forecast of `horizon` steps with intervals of this coverage; `plan` as [`Self::plan`], or that one. Its parts are left empty.
    ///
    /// # Errors
    /// As [`Fit::forecast`].
    pub fn forecast(
        &self,
        horizon: usize,
        coverage: f64,
        plan: Option<&[Vec<f64>]>,
    ) -> Result<Forecast, Trouble> {
        let plan = plan.unwrap_or(&self.plan);
        for (name, column) in self.driver_names().zip(plan) {
            if let Some(step) = (0..horizon).find(|&s| !column.get(s).is_some_and(|v| v.is_finite())) {
                return Err(Trouble::NoDriverPlan { driver: name.clone(), step: step + 1 });
            }
        }
        let (_, system) = self.model_and_system()?;
        let end = self.end();
        let scale = ForecastScale {
            transform: self.transform,
            unit: 1.0,
            shift: self.shift,
            h: system.h,
            z: normal_quantile(0.5 + 0.5 * coverage),
        };
        let from = forecast::From { system: &system, end: &end, drivers: &[], drifting: plan, first: 0 };
        scale
            .forecast(horizon, |joint| forecast::run(from, horizon, &[], joint))
            .map(|(forecast, _)| forecast)
    }

    /// The standing after further points: `observed` on the grid from the point after the last one, NaN = missing, `drivers` over the same
    /// points and on into the plan. Parameters stay. Points after the last new observation only change the plan.
    ///
    /// # Errors
    /// A value that the model does not take, a driver without a value where the series has one.
    pub fn advance(&self, observed: &[f64], drivers: &[Vec<f64>]) -> Result<Self, Trouble> {
        let seen = observed.iter().rposition(|v| !v.is_nan()).map_or(0, |last| last + 1);
        let rest = |from: usize| {
            let planned = |column: &Vec<f64>| column.get(from..).unwrap_or_default().to_vec();
            drivers.iter().map(planned).collect::<Vec<_>>()
        };
        if seen == 0 {
            let plan = if drivers.iter().all(Vec::is_empty) { self.plan.clone() } else { rest(0) };
            return Ok(Self { plan, ..self.clone() });
        }
        self.examine(&observed[..seen], drivers)?;
        let modelled: Vec<f64> =
            observed[..seen].iter().map(|&y| self.transform.forward(y) - self.shift).collect();
        let filled: Vec<Vec<f64>> = drivers
            .iter()
            .map(|column| {
                // No equation uses a driver where the series is missing.
                (0..seen).map(|t| column.get(t).copied().filter(|v| v.is_finite()).unwrap_or(0.0)).collect()
            })
            .collect();
        let (_, system) = self.model_and_system()?;
        // All points but the last run through the filter, of which only its end is kept; the last is taken in here, up to its filtered
        // state.
        let mut data = Data::<f64>::default();
        data.clear(0, filled.len());
        data.load_columns(0, &modelled[..seen - 1], &[], &filled);
        let beyond = Trouble::Numerical {
            what: "the new observations take the likelihood out of the range of double precision; fit the series again",
        };
        let (a, p) = self.predicted(&system);
        let mut pass = Pass::default();
        filter::resume(
            &Dynamics::new(&system),
            &data,
            (&a, &packed(&p, a.len())),
            Keep::Likelihood,
            &mut pass,
        );
        let reached = if seen > 1 { pass.reached(0) } else { Ok(0.0) };
        let before = reached.map_err(|_| beyond.clone())?;
        let (mut state, size) = (pass.a, a.len());
        let mut covariance: Vec<f64> =
            (0..size * size).map(|ij| pass.p[packed_at(ij / size, ij % size)]).collect();
        let last = taken_in(&system, (&mut state, &mut covariance), modelled[seen - 1], (&filled, seen - 1));
        let log_likelihood = self.log_likelihood + before + last;
        if !(log_likelihood.is_finite() && state.iter().chain(&covariance).all(|v| v.is_finite())) {
            return Err(beyond);
        }
        Ok(Self {
            state,
            covariance: packed(&covariance, size),
            points: self.points + seen,
            n: self.n + pass.observed[0] + 1,
            log_likelihood,
            plan: rest(seen),
            ..self.clone()
        })
    }

    /// Names of all drivers, constant coefficients first.
    pub fn driver_names(&self) -> impl Iterator<Item = &String> {
        self.drivers.iter().chain(&self.structure.drifting_drivers)
    }

    /// The components of the last point.
    pub fn last_point(&self) -> LastPoint {
        let Ok((model, system)) = self.model_and_system() else { return LastPoint::default() };
        let part = |role: Role, unit: Unit| {
            let specs = model.state_specs();
            let is = |i: usize| specs.get(i).is_some_and(|spec| spec.role == role);
            let weights: Vec<(usize, f64)> = match role {
                Role::Slope => (0..specs.len()).filter(|&i| is(i)).map(|i| (i, 1.0)).take(1).collect(),
                _ => system.fixed_loads.iter().copied().filter(|&(i, _)| is(i)).collect(),
            };
            if weights.is_empty() {
                return None;
            }
            let mean = weights.iter().map(|&(i, w)| w * self.state[i]).sum::<f64>();
            let mut variance = 0.0;
            for &(i, a) in &weights {
                variance += weights.iter().map(|&(j, b)| a * b * self.covariance_of(i, j)).sum::<f64>();
            }
            let smoothed = Smoothed { mean: vec![mean], variance: vec![variance.max(0.0)] };
            let State { value, std_error } = self.transform.component(&smoothed, unit, 1.0, self.shift);
            value.first().copied().zip(std_error.first().copied())
        };
        LastPoint {
            level: part(Role::Level, Unit::Data),
            slope: part(Role::Slope, Unit::Growth),
            seasonal: part(Role::Season, Unit::Factor),
            cycle: part(Role::Cycle, Unit::Factor),
            autoregression: part(Role::Autoregression, Unit::Factor),
        }
    }

    /// Coefficient of each driver at the last point with its standard error, model scale, in the order of [`Self::driver_names`].
    pub fn coefficients(&self) -> Vec<(f64, f64)> {
        let Ok((model, _)) = self.model_and_system() else { return Vec::new() };
        let states = model.states();
        let drifting = |driver: usize| {
            model.state_specs().iter().position(|spec| spec.role == Role::Driver(driver)).unwrap_or(0)
        };
        let constant = (0..self.drivers.len()).map(|driver| states + driver);
        let at = constant.chain((0..self.structure.drifting_drivers.len()).map(drifting));
        at.map(|i| (self.state[i], self.covariance_of(i, i).max(0.0).sqrt())).collect()
    }

    /// AIC and BIC of all observations so far (DK 7.4).
    pub fn criteria(&self) -> (f64, f64) {
        let w = self.parameters.iter().filter(|p| !p.known).count() + usize::from(self.power_estimated);
        let l = self.log_likelihood;
        (checks::aic(l, w, self.diffuse), checks::bic(l, w, self.diffuse, self.n))
    }

    /// What speaks against this being a standing that [`Fit::standing`] or [`Self::advance`] made; `None` if nothing does. For values that
    /// were written down and read back.
    pub fn contradiction(&self) -> Option<&'static str> {
        let structure = &self.structure;
        let size = self.state.len();
        // Before the model is built: a damaged count must not ask for memory.
        let season_fits = |season: &crate::structure::Season| {
            let states = season.harmonics.map_or(season.period - 1.0, |count| 2.0 * count as f64 - 1.0);
            (2.0..=1e5).contains(&season.period)
                && states <= size as f64
                && match season.harmonics {
                    Some(count) => (1.0..=season.period / 2.0).contains(&(count as f64)),
                    None => season.period.fract() == 0.0,
                }
        };
        let cycle_fits = structure
            .cycle
            .is_none_or(|c| c.shortest > 2.0 && c.longest.is_finite() && c.longest >= c.shortest);
        if !structure.seasons.iter().all(season_fits) || !cycle_fits || structure.autoregression > MAX_ORDER {
            return Some("a season, a cycle or an autoregression is out of range");
        }
        if self.transform.power().is_some_and(|power| !(0.0..=LARGEST_POWER).contains(&power)) {
            return Some("the power of its transform is out of range");
        }
        let model = structure.model();
        let lengths = model.states() + self.drivers.len() == size
            && self.covariance.len() == size * (size + 1) / 2
            && structure.drivers == self.drivers.len()
            && self.plan.len() == self.drivers.len() + structure.drifting_drivers.len()
            && model.diffuse_elements() == self.diffuse
            && model.parameters().len() == self.parameters.len();
        if !lengths {
            return Some("its states and parameters are not those of its structure");
        }
        let parameter_fits = |(spec, parameter): (&ParameterSpec, &Parameter)| {
            let value = parameter.value;
            spec.name == parameter.name
                && match spec.link {
                    Link::Variance => value.is_finite() && value >= 0.0,
                    Link::Between { low, high } => {
                        value.is_nan()
                            || parameter.known && value.is_finite()
                            || (low..=high).contains(&value)
                    }
                    Link::Free => value.is_nan() || value.is_finite(),
                }
        };
        if !model.parameters().iter().zip(&self.parameters).all(parameter_fits) {
            return Some("a parameter is missing or out of range");
        }
        let in_range = |v: &f64| v.abs() <= crate::fit::LARGEST * crate::fit::LARGEST;
        let finite = self.shift.is_finite() && self.log_likelihood.is_finite();
        if !finite || !self.state.iter().chain(&self.covariance).all(in_range) {
            return Some("its state is not finite");
        }
        let positive = (0..size).all(|i| {
            (0..=i).all(|j| {
                let bound = self.covariance_of(i, i) * self.covariance_of(j, j);
                self.covariance_of(i, i) >= 0.0
                    && self.covariance_of(i, j).powi(2) <= bound * (1.0 + 1e-6) + 1e-300
            })
        });
        if !positive {
            return Some("its covariance is none");
        }
        (self.n == 0 || self.n > self.points || self.diffuse > self.n)
            .then_some("its counts do not go together")
    }

    fn covariance_of(&self, i: usize, j: usize) -> f64 {
        let (row, column) = (i.max(j), i.min(j));
        self.covariance[row * (row + 1) / 2 + column]
    }

    /// The system with the coefficients of constant drivers as states, on the data's own size.
    fn model_and_system(&self) -> Result<(Model, System), Trouble> {
        let mut model = self.structure.model();
        let mut system = model.system();
        let values: Vec<f64> = self
            .parameters
            .iter()
            .zip(model.parameters())
            .map(|(p, spec)| match spec.link {
                // A damping or period that shapes nothing: any value gives the same model.
                Link::Between { low, high } if p.value.is_nan() => 0.5 * (low + high),
                Link::Free if p.value.is_nan() => 0.0,
                _ => p.value,
            })
            .collect();
        model.fill(&values, &mut system).map_err(|_| Trouble::Numerical {
            what: "the stored parameters leave the stationary region; fit the series again",
        })?;
        let (states, constant) = (system.states, self.drivers.len());
        for load in &mut system.driver_loads {
            load.1 += constant;
        }
        for driver in 0..constant {
            system.transition.push(Op::Keep);
            system.driver_loads.push((states + driver, driver));
            system.q.push(0.0);
        }
        system.states += constant;
        (system.diffuse, system.proper) = (Vec::new(), Vec::new());
        Ok((model, system))
    }

    /// The last point, as a series that ends there.
    fn end(&self) -> End {
        let size = self.state.len();
        End {
            width: 1,
            state: self.state.clone(),
            covariance: (0..size * size).map(|ij| self.covariance_of(ij / size, ij % size)).collect(),
            coefficients: Vec::new(),
        }
    }

    /// State and covariance predicted for the next point.
    fn predicted(&self, system: &System) -> (Vec<f64>, Vec<f64>) {
        let End { state: mut a, covariance: mut p, .. } = self.end();
        system.forward(&mut a, 1);
        system.propagate(&mut p);
        system.disturb(&mut p);
        (a, p)
    }

    /// What is wrong with new observations as such.
    fn examine(&self, observed: &[f64], drivers: &[Vec<f64>]) -> Result<(), Trouble> {
        match crate::fit::examine(observed) {
            Err(Trouble::Constant { .. }) => {}
            other => other?,
        }
        if let Some(index) = self.transform.refuses(observed) {
            return Err(Trouble::NotPositive { index, value: observed[index], transform: self.transform });
        }
        for (name, column) in self.driver_names().zip(drivers) {
            let lacks = |&t: &usize| {
                !observed[t].is_nan()
                    && !column.get(t).is_some_and(|v| v.is_finite() && v.abs() <= crate::fit::LARGEST)
            };
            if let Some(index) = (0..observed.len()).find(lacks) {
                return Err(Trouble::DriverGap { driver: name.clone(), index });
            }
        }
        Ok(())
    }
}

/// Takes an observation into the predicted state and covariance, which become the filtered ones, and returns its share of the
/// log-likelihood (DK eqs. 4.13, 4.14).
fn taken_in(
    system: &System,
    (state, covariance): (&mut [f64], &mut [f64]),
    y: f64,
    (drivers, t): (&[Vec<f64>], usize),
) -> f64 {
    let m = state.len();
    let mut pz = vec![0.0; m];
    let (mut error, mut f) = (y, system.h);
    system.for_loads(drivers, t, |i, load| {
        error -= load * state[i];
        pz.iter_mut().zip(&covariance[i * m..(i + 1) * m]).for_each(|(to, from)| *to += load * from);
    });
    system.for_loads(drivers, t, |i, load| f += load * pz[i]);
    for i in 0..m {
        state[i] += pz[i] / f * error;
        for j in 0..m {
            covariance[i * m + j] -= pz[i] / f * pz[j];
        }
    }
    -0.5 * (std::f64::consts::TAU.ln() + f.ln() + error * error / f)
}

/// The lower triangle of a square matrix, row by row.
fn packed(matrix: &[f64], size: usize) -> Vec<f64> {
    (0..size).flat_map(|i| matrix[i * size..=i * size + i].to_vec()).collect()
}
