//! A fit's smoothed components and forecasts on the data's scale.

use crate::error::Trouble;
use crate::fit::Fit;
use crate::forecast::Step;
use crate::quantile::normal_quantile;
use crate::results::{Components, Forecast, State};
use crate::smoother::{Functional, Smoothed};
use crate::structure::Role;
use crate::transform::{self, Unit};

/// Longest horizon: the totals of a log model take time that grows with its square.
pub const LONGEST_HORIZON: usize = 10_000;

/// What each functional of a pass is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Part {
    Level,
    Slope,
    Seasonal,
    Cycle,
    Effect(usize),
    Coefficient(usize),
    Signal,
}

/// Running sum of lognormal steps: interval of the lognormal with its mean and variance.
struct LogTotals {
    unit: f64,
    shift: f64,
    expected: Vec<f64>,
    total: f64,
    /// Variance of the total over its squared mean, which stays in range where the variance does not.
    relative: f64,
    z: f64,
    ends: Vec<(f64, f64)>,
}

impl LogTotals {
    /// Adds a step: `Cov(exp x, exp y) = E exp x E exp y (exp(cov) - 1)`, summed over the steps before.
    fn add(&mut self, step: &Step<'_>) {
        let square = self.unit * self.unit;
        let (expected, _) = transform::lognormal(step.mean * self.unit + self.shift, step.variance * square);
        let before = self.total;
        self.total += expected;
        let total = self.total;
        let share = |part: f64| if total > 0.0 { part / total } else { 0.0 };
        let mut relative = self.relative * share(before).powi(2);
        for (earlier, c) in self.expected.iter().zip(step.with_earlier) {
            relative += 2.0 * share(*earlier) * share(expected) * (c * square).min(700.0).exp_m1();
        }
        relative += share(expected).powi(2) * (step.variance * square).min(700.0).exp_m1();
        self.relative = relative;
        self.expected.push(expected);
        let (m, v) = transform::lognormal_with_moments(total, relative);
        self.ends.push(((m - self.z * v.sqrt()).exp(), (m + self.z * v.sqrt()).exp()));
    }
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
                let (value, low, high) = if self.unknown[t] {
                    (f64::NAN, f64::NAN, f64::NAN)
                } else {
                    let (m, s) = (m * self.scaling.unit + self.scaling.shift, v.sqrt() * self.scaling.unit);
                    (self.back(m), self.back(m - z * s), self.back(m + z * s))
                };
                out.fitted.push(value);
                out.lower.push(low);
                out.upper.push(high);
                let observed = self.back(self.modelled[t]);
                out.irregular.push(if self.log { observed / value } else { observed - value });
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
        let (unit, shift) = (self.scaling.unit, self.scaling.shift);
        let z = normal_quantile(0.5 + 0.5 * coverage);
        let h = self.evaluation.system().h;
        let mut totals =
            LogTotals { unit, shift, expected: Vec::new(), total: 0.0, relative: 0.0, z, ends: Vec::new() };
        let mut add = |step: Step<'_>| totals.add(&step);
        let joint: Option<&mut dyn FnMut(Step<'_>)> = if self.log { Some(&mut add) } else { None };
        let path = self.evaluation.ahead(horizon, &functionals, joint);
        let mut out =
            Forecast { parts: self.assemble(&parts, &path.functionals, horizon, n), ..Forecast::default() };
        let mut total = 0.0;
        for step in 0..horizon {
            let m = path.signal.mean[step] * unit + shift;
            let v = (path.signal.variance[step] + h) * unit * unit;
            let s = v.sqrt();
            if self.log && (v > transform::LARGEST || m + (z * s).max(0.5 * v) > transform::LARGEST) {
                return Err(Trouble::Numerical {
                    what: "on the log scale the forecast leaves the range of double precision within the horizon; use transform => 'none', a damped trend, or a shorter horizon",
                });
            }
            let (expected, std_error) = if self.log { transform::lognormal(m, v) } else { (m, s) };
            out.expected.push(expected);
            out.std_error.push(std_error);
            out.lower.push(self.back(m - z * s));
            out.upper.push(self.back(m + z * s));
            total += expected;
            out.total_expected.push(total);
            let (low, high) = if self.log {
                totals.ends[step]
            } else {
                let s = path.sum_variance[step].sqrt() * unit;
                (total - z * s, total + z * s)
            };
            out.total_lower.push(low);
            out.total_upper.push(high);
        }
        Ok(out)
    }

    fn back(&self, value: f64) -> f64 {
        if self.log { transform::exp(value) } else { value }
    }

    /// The functionals of all components this fit has, and what each is for.
    fn functionals(&self, signal: bool) -> (Vec<Part>, Vec<Functional>) {
        let evaluation = &self.evaluation;
        let mut list: Vec<(Part, Option<Functional>)> = vec![
            (Part::Level, evaluation.functional(Role::Level)),
            (Part::Slope, evaluation.functional(Role::Slope)),
            (Part::Seasonal, evaluation.functional(Role::Season)),
            (Part::Cycle, evaluation.functional(Role::Cycle)),
        ];
        for driver in 0..self.drivers.1.len() {
            list.push((Part::Effect(driver), evaluation.effect(driver)));
            list.push((Part::Coefficient(driver), evaluation.functional(Role::Driver(driver))));
        }
        if signal {
            list.push((Part::Signal, Some(Functional::Signal)));
        }
        list.into_iter().filter_map(|(part, f)| f.map(|f| (part, f))).unzip()
    }

    /// Components from smoothed or predicted functionals; `first` is the grid point of their first element.
    fn assemble(&self, parts: &[Part], smoothed: &[Smoothed], count: usize, first: usize) -> Components {
        let (unit, shift) = (self.scaling.unit, self.scaling.shift);
        let component = |s: &Smoothed, kind: Unit| transform::component(s, self.log, kind, unit, shift);
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
