//! A fit's smoothed components and forecasts on the data's scale.

use crate::error::Trouble;
use crate::fit::Fit;
use crate::forecast::{Path, Step};
use crate::quantile::normal_quantile;
use crate::results::{Components, Forecast, State};
use crate::smoother::{Functional, Smoothed};
use crate::structure::{Model, Role};
use crate::system::System;
use crate::totals::Totals;
use crate::transform::{Transform, Unit};

/// Longest horizon: the totals of a log model take time that grows with its square.
pub const LONGEST_HORIZON: usize = 10_000;

/// What each functional of a pass is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Part {
    Level,
    Slope,
    Seasonal,
    Cycle,
    Autoregression,
    Effect(usize),
    Coefficient(usize),
    Signal,
}

/// What takes a forecast from the working scale to the data's.
#[derive(Debug, Clone, Copy)]
pub(crate) struct ForecastScale {
    pub(crate) transform: Transform,
    pub(crate) unit: f64,
    pub(crate) shift: f64,
    /// Irregular variance, working scale.
    pub(crate) h: f64,
    /// Normal quantile of the intervals' upper end.
    pub(crate) z: f64,
}

impl ForecastScale {
    /// The forecast that `ahead` runs, all but its parts, and the path it came from. `ahead` gets the listener for the joint covariance, where one is needed.
    ///
    /// # Errors
    /// [`Trouble::Numerical`] when the way back overflows.
    pub(crate) fn forecast(
        &self,
        horizon: usize,
        ahead: impl FnOnce(Option<&mut dyn FnMut(Step<'_>)>) -> Path,
    ) -> Result<(Forecast, Path), Trouble> {
        let Self { transform, unit, shift, h, z } = *self;
        let transformed = transform != Transform::None;
        let mut totals = Totals::new(transform, unit, shift, z);
        let mut add = |step: Step<'_>| totals.add(&step);
        let path = ahead(if transformed { Some(&mut add) } else { None });
        let mut out = Forecast::default();
        let mut total = 0.0;
        for step in 0..horizon {
            let m = path.signal.mean[step] * unit + shift;
            let v = (path.signal.variance[step] + h) * unit * unit;
            let s = v.sqrt();
            if !transform.in_range(m, v, z) {
                return Err(Trouble::Numerical {
                    what: "on the transformed scale the forecast leaves the range of double precision within the horizon; use transform => 'none', a damped trend, or a shorter horizon",
                });
            }
            let (expected, std_error) = transform.moments(m, v);
            out.expected.push(expected);
            out.std_error.push(std_error);
            out.lower.push(transform.back(m - z * s));
            out.upper.push(transform.back(m + z * s));
            total += expected;
            out.total_expected.push(total);
            let (low, high) = if transformed {
                totals.ends[step]
            } else {
                let s = path.sum_variance[step].sqrt() * unit;
                (total - z * s, total + z * s)
            };
            out.total_lower.push(low);
            out.total_upper.push(high);
        }
        Ok((out, path))
    }
}

/// The functionals whose smoothing [`Fit::components`] asks for.
pub(crate) fn of_components(model: &Model, system: &System) -> Vec<Functional> {
    functionals(model, system, true).1
}

/// The functionals of all components of a model, and what each is for.
fn functionals(model: &Model, system: &System, signal: bool) -> (Vec<Part>, Vec<Functional>) {
    let of = |role| Functional::of(role, model, system);
    let mut list: Vec<(Part, Option<Functional>)> = vec![
        (Part::Level, of(Role::Level)),
        (Part::Slope, of(Role::Slope)),
        (Part::Seasonal, of(Role::Season)),
        (Part::Cycle, of(Role::Cycle)),
        (Part::Autoregression, of(Role::Autoregression)),
    ];
    for &(state, driver) in &system.driver_loads {
        list.push((Part::Effect(driver), Some(Functional::DriverEffect { state, driver })));
        list.push((Part::Coefficient(driver), of(Role::Driver(driver))));
    }
    if signal {
        list.push((Part::Signal, Some(Functional::Signal)));
    }
    list.into_iter().filter_map(|(part, f)| f.map(|f| (part, f))).unzip()
}

impl Fit {
    /// Smoothed components along the grid of the history. `coverage` of the interval of the signal, between 0 and 1.
    ///
    /// # Errors
    /// None today; a later structure may fail numerically.
    pub fn components(&self, coverage: f64) -> Result<Components, Trouble> {
        let (parts, functionals) = self.functionals(true);
        let smoothing = self.evaluation.smooth(&functionals);
        let n = self.modelled.len();
        let mut out = self.assemble(&parts, &smoothing.functionals, n, 0);
        let z = normal_quantile(0.5 + 0.5 * coverage);
        if let Some(signal) = parts.iter().position(|p| *p == Part::Signal) {
            let signal = &smoothing.functionals[signal];
            for t in 0..n {
                let (m, v) = (signal.mean[t], signal.variance[t]);
                let (m, s) = (m * self.scaling.unit + self.scaling.shift, v.sqrt() * self.scaling.unit);
                let back = |x| if self.unknown[t] { f64::NAN } else { self.transform.back(x) };
                let (x, fitted) = (self.modelled[t], back(m));
                out.fitted.push(fitted);
                out.lower.push(back(m - z * s));
                out.upper.push(back(m + z * s));
                let m = if self.unknown[t] { f64::NAN } else { m };
                out.irregular.push(self.transform.irregular((self.transform.back(x), fitted), (x, m)));
            }
        }
        out.outlier_t = smoothing.outlier_t;
        out.shift_t = smoothing.shift_t;
        Ok(out)
    }

    /// Forecast of `horizon` steps with intervals of this coverage. The series must carry its drivers' plan.
    ///
    /// # Errors
    /// [`Trouble::NoDriverPlan`] names the first driver and step without a value; [`Trouble::Numerical`] when a log model's
    /// forecast overflows.
    pub fn forecast(&self, horizon: usize, coverage: f64) -> Result<Forecast, Trouble> {
        let n = self.modelled.len();
        let names = self.drivers.0.iter().chain(&self.drivers.1);
        for (column, name) in self.plan.iter().zip(names) {
            if let Some(step) = (0..horizon).find(|&s| !column.get(n + s).is_some_and(|v| v.is_finite())) {
                return Err(Trouble::NoDriverPlan { driver: name.clone(), step: step + 1 });
            }
        }
        let (parts, functionals) = self.functionals(false);
        let scale = ForecastScale {
            transform: self.transform,
            unit: self.scaling.unit,
            shift: self.scaling.shift,
            h: self.evaluation.system().h,
            z: normal_quantile(0.5 + 0.5 * coverage),
        };
        let (mut out, path) =
            scale.forecast(horizon, |joint| self.evaluation.ahead(horizon, &functionals, joint))?;
        out.parts = self.assemble(&parts, &path.functionals, horizon, n);
        Ok(out)
    }

    /// The functionals of all components this fit has, and what each is for.
    fn functionals(&self, signal: bool) -> (Vec<Part>, Vec<Functional>) {
        functionals(self.evaluation.model(), self.evaluation.system(), signal)
    }

    /// Components from smoothed or predicted functionals; `first` is the grid point of their first element.
    fn assemble(&self, parts: &[Part], smoothed: &[Smoothed], count: usize, first: usize) -> Components {
        let (unit, shift) = (self.scaling.unit, self.scaling.shift);
        let component = |s: &Smoothed, kind: Unit| self.transform.component(s, kind, unit, shift);
        let mut out = Components::default();
        for (driver, x) in self.evaluation.series().drivers.iter().enumerate() {
            let (b, se) = self.evaluation.coefficient(driver);
            let x = &x[first..first + count];
            let effect = Smoothed {
                mean: x.iter().map(|x| b * x).collect(),
                variance: x.iter().map(|x| (se * x).powi(2)).collect(),
            };
            out.effects.push(self.hide_unknown(component(&effect, Unit::Factor), first));
            out.coefficients.push(State { value: vec![b * unit; count], std_error: vec![se * unit; count] });
        }
        for (part, s) in parts.iter().zip(smoothed) {
            match part {
                Part::Level => out.level = Some(component(s, Unit::Data)),
                Part::Slope => out.slope = Some(component(s, Unit::Growth)),
                Part::Seasonal => out.seasonal = Some(component(s, Unit::Factor)),
                Part::Cycle => out.cycle = Some(component(s, Unit::Factor)),
                Part::Autoregression => out.autoregression = Some(component(s, Unit::Factor)),
                Part::Effect(_) => out.effects.push(self.hide_unknown(component(s, Unit::Factor), first)),
                Part::Coefficient(driver) => {
                    // The coefficient of the driver as handed in, not of its scaled copy.
                    let factor = unit / self.scaling.drivers[*driver];
                    out.coefficients.push(State {
                        value: s.mean.iter().map(|m| m * factor).collect(),
                        std_error: s.variance.iter().map(|v| v.sqrt() * factor).collect(),
                    });
                }
                Part::Signal => {}
            }
        }
        out
    }

    fn hide_unknown(&self, mut effect: State, first: usize) -> State {
        for (t, (value, error)) in effect.value.iter_mut().zip(&mut effect.std_error).enumerate() {
            if self.unknown.get(first + t).is_some_and(|u| *u) {
                (*value, *error) = (f64::NAN, f64::NAN);
            }
        }
        effect
    }
}
