//! A fitted series: from the request to the estimate, and the diagnostics of it.

mod exactness;

use crate::box_cox;
use crate::choose::{self, Choice};
use crate::error::Trouble;
use crate::estimate::{self, Estimate};
use crate::evaluation::{Evaluation, EvaluationError};
use crate::objective::{Objective, Workspace};
use crate::request::{Request, Series};
use crate::residual_checks as checks;
use crate::results::{Diagnostics, Parameter};
use crate::scaling::Scaling;
use crate::starts;
use crate::structure::{Link, Model, Role, Structure, Trend};
use crate::transform::Transform;

/// Largest magnitude of an observation: its square must stay in range.
pub(crate) const LARGEST: f64 = 1e150;

/// One fitted series. It keeps the series on its working scale and answers from there.
#[derive(Debug, Clone)]
pub struct Fit {
    pub(crate) structure: Structure,
    pub(crate) transform: Transform,
    /// The power of the transform was estimated.
    pub(crate) power_estimated: bool,
    pub(crate) scaling: Scaling,
    pub(crate) evaluation: Evaluation,
    /// Observations on the model scale (after the transform), NaN = missing.
    pub(crate) modelled: Vec<f64>,
    /// Names of constant and drifting drivers.
    pub(crate) drivers: (Vec<String>, Vec<String>),
    /// Grid points at which some driver has no value: effects and the signal are unknown there.
    pub(crate) unknown: Vec<bool>,
    /// The plan as handed in, to tell which step of a horizon lacks it.
    pub(crate) plan: Vec<Vec<f64>>,
    parameters: Vec<Parameter>,
    estimate: Estimate,
}

/// Fits one series.
///
/// # Errors
/// [`Trouble`] says what is wrong with the series, or why its structure cannot be fitted to it.
pub fn fit(series: &Series, request: &Request, workspace: &mut Workspace) -> Result<Fit, Trouble> {
    examine(&series.observed)?;
    let choice = choose::choose(request, &series.observed)?;
    if !choice.power_open {
        return fit_as(series, request, &choice, workspace);
    }
    let power = box_cox::power(series, request, &choice, workspace)?;
    let choice = Choice { transform: Transform::BoxCox(power), ..choice };
    Ok(fit_as(series, request, &choice, workspace)?.with_power(true))
}

/// Fits one series in the structure and on the scale of `choice`.
///
/// # Errors
/// As [`fit`].
pub(crate) fn fit_as(
    series: &Series,
    request: &Request,
    choice: &Choice,
    workspace: &mut Workspace,
) -> Result<Fit, Trouble> {
    let model = choice.structure.model();
    fit_prepared(prepare(series, request, choice, &model, workspace)?, &model, request, workspace)
}

/// Fits a prepared series. `model`: that of its structure.
///
/// # Errors
/// As [`fit`].
pub(crate) fn fit_prepared(
    prepared: Prepared,
    model: &Model,
    request: &Request,
    workspace: &mut Workspace,
) -> Result<Fit, Trouble> {
    let mut objective = Objective::new(model.clone(), &prepared.working, workspace);
    let trouble = |error| trouble_of(error, model, request);
    let estimate =
        estimate::maximise(&mut objective, &prepared.known, &prepared.working.observed).map_err(trouble)?;
    drop(objective);
    let evaluation =
        Evaluation::new(model.clone(), &estimate.values, prepared.working.clone()).map_err(trouble)?;
    finish(prepared, request, estimate, evaluation)
}

/// A series that is ready to be estimated.
#[derive(Debug, Clone)]
pub(crate) struct Prepared {
    pub(crate) structure: Structure,
    transform: Transform,
    modelled: Vec<f64>,
    unknown: Vec<bool>,
    plan: Vec<Vec<f64>>,
    scaling: Scaling,
    /// The series on the scale that is worked on.
    pub(crate) working: Series,
    /// Known parameters on that scale.
    pub(crate) known: Vec<Option<f64>>,
    /// What takes each parameter to the model's scale.
    factors: Vec<f64>,
    /// Size of an error of the data's own last digits, on the model's scale.
    rounding: f64,
}

/// Transforms, checks and scales one series for the structure of `choice`, whose model is `model`.
///
/// # Errors
/// As [`fit`].
pub(crate) fn prepare(
    series: &Series,
    request: &Request,
    choice: &Choice,
    model: &Model,
    workspace: &mut Workspace,
) -> Result<Prepared, Trouble> {
    let Choice { structure, transform, .. } = choice.clone();
    let modelled: Vec<f64> = series.observed.iter().map(|&v| transform.forward(v)).collect();
    let (filled, unknown) = fill_drivers(series, request, &modelled)?;
    let points = modelled.len() - modelled.iter().position(|v| !v.is_nan()).unwrap_or(0);
    if let Some(season) = structure.seasons.iter().find(|s| (points as f64) < s.period) {
        return Err(Trouble::ShorterThanSeason { period: season.period, points });
    }
    let known = known_values(model, request);
    let seen = modelled.iter().filter(|v| !v.is_nan()).count();
    let open = known.iter().filter(|k| k.is_none()).count();
    let needed = model.diffuse_elements() + open.max(1) + 1;
    if seen < needed {
        return Err(Trouble::TooShort { needed, got: seen });
    }
    let scaling = Scaling::of(&filled, structure.trend.has_level());
    let working = scaling.apply(&filled);
    let factors = scaling.factors(model);
    let known: Vec<Option<f64>> = known.iter().zip(&factors).map(|(k, f)| k.map(|v| v / f)).collect();
    let rounding = ROUNDING * modelled.iter().filter(|v| !v.is_nan()).fold(0.0_f64, |a, v| a.max(v.abs()));
    if structure.trend == Trend::Damped
        && exactness::may_be_exact(&structure, &working, rounding / scaling.unit)
        && starts::is_exact(&straightened(&structure), &working, rounding / scaling.unit, workspace)
    {
        return Err(Trouble::ExactFit);
    }
    let plan = series.drivers.iter().chain(&series.drifting_drivers).cloned().collect();
    Ok(Prepared { structure, transform, modelled, unknown, plan, scaling, working, known, factors, rounding })
}

/// The fit of a prepared series from its estimate and the evaluation there.
///
/// # Errors
/// As [`fit`].
pub(crate) fn finish(
    prepared: Prepared,
    request: &Request,
    estimate: Estimate,
    evaluation: Evaluation,
) -> Result<Fit, Trouble> {
    let Prepared { structure, transform, modelled, unknown, plan, scaling, known, factors, rounding, .. } =
        prepared;
    if reproduces(&evaluation, rounding, scaling.unit) {
        return Err(Trouble::ExactFit);
    }
    let model = evaluation.model();
    let parameters: Vec<Parameter> = (0..factors.len())
        .map(|i| Parameter {
            name: model.parameters()[i].name.clone(),
            value: if means_nothing(model, &known, &estimate.values, i) {
                f64::NAN
            } else {
                estimate.values[i] * factors[i]
            },
            std_error: estimate.std_errors[i] * factors[i],
            known: known[i].is_some(),
        })
        .collect();
    if parameters.iter().any(|p| p.value.is_infinite()) {
        return Err(Trouble::Numerical {
            what: "a variance leaves the range of double precision; bring the series and its drivers to similar sizes",
        });
    }
    Ok(Fit {
        structure,
        transform,
        power_estimated: false,
        scaling,
        evaluation,
        modelled,
        drivers: (request.drivers.clone(), request.drifting_drivers.clone()),
        unknown,
        plan,
        parameters,
        estimate,
    })
}

/// The structure with a straight line for its trend. A damped trend comes as near to a line as it likes without being one, so that
/// data on a line must be found out this way.
fn straightened(structure: &Structure) -> Model {
    Structure { trend: Trend::FixedLine, ..structure.clone() }.model()
}

/// A damping or period whose component has no variance shapes nothing: any value gives the same model.
fn means_nothing(model: &Model, known: &[Option<f64>], values: &[f64], index: usize) -> bool {
    let specs = model.parameters();
    specs[index].link != Link::Variance
        && known[index].is_none()
        && (0..specs.len()).any(|i| {
            specs[i].link == Link::Variance && specs[i].role == specs[index].role && values[i] == 0.0
        })
}

/// Size of the one-step errors, relative to the values themselves, at which they are rounding.
pub(crate) const ROUNDING: f64 = 4.0 * f64::EPSILON;

/// The structure foretells every value to `rounding`. `unit` takes the errors to its scale.
pub(crate) fn reproduces(evaluation: &Evaluation, rounding: f64, unit: f64) -> bool {
    let one_step = evaluation.one_step();
    let errors = one_step.standardised.iter().zip(&one_step.variance).map(|(e, v)| e * v.sqrt() * unit);
    let mut worst: Option<f64> = None;
    for error in errors.filter(|e| !e.is_nan()) {
        worst = Some(worst.unwrap_or(0.0).max(error.abs()));
    }
    worst.is_some_and(|w| w <= rounding)
}

/// What is wrong with the observations as such.
pub(crate) fn examine(observed: &[f64]) -> Result<(), Trouble> {
    let mut first = None;
    let mut moves = false;
    for (index, &value) in observed.iter().enumerate() {
        if value.is_nan() {
            continue;
        }
        if value.is_infinite() {
            return Err(Trouble::NotFinite { index });
        }
        if value.abs() > LARGEST {
            return Err(Trouble::TooLarge { index, value });
        }
        match first {
            None => first = Some(value),
            Some(f) => moves |= value != f,
        }
    }
    match first {
        None => Err(Trouble::AllMissing),
        Some(value) if !moves && observed.iter().filter(|v| !v.is_nan()).count() > 1 => {
            Err(Trouble::Constant { value })
        }
        Some(_) => Ok(()),
    }
}

/// Drivers with zeros where neither they nor the series have a value (no equation uses them there), and
/// those points.
pub(crate) fn fill_drivers(
    series: &Series,
    request: &Request,
    modelled: &[f64],
) -> Result<(Series, Vec<bool>), Trouble> {
    let n = modelled.len();
    let mut unknown = vec![false; n];
    let mut fill = |columns: &[Vec<f64>], names: &[String]| -> Result<Vec<Vec<f64>>, Trouble> {
        let mut out = Vec::with_capacity(columns.len());
        for (column, name) in columns.iter().zip(names) {
            let mut filled = column.clone();
            filled.resize(column.len().max(n), f64::NAN);
            for index in 0..n {
                if !filled[index].is_finite() {
                    if !modelled[index].is_nan() {
                        return Err(Trouble::DriverGap { driver: name.clone(), index });
                    }
                    unknown[index] = true;
                    filled[index] = 0.0;
                }
                if filled[index].abs() > LARGEST {
                    return Err(Trouble::DriverGap { driver: name.clone(), index });
                }
            }
            out.push(filled);
        }
        Ok(out)
    };
    let drivers = fill(&series.drivers, &request.drivers)?;
    let drifting_drivers = fill(&series.drifting_drivers, &request.drifting_drivers)?;
    Ok((Series { observed: modelled.to_vec(), drivers, drifting_drivers }, unknown))
}

fn known_values(model: &Model, request: &Request) -> Vec<Option<f64>> {
    let value_of = |name: &str| request.known.iter().find(|(n, _)| n == name).map(|(_, v)| *v);
    model.parameters().iter().map(|p| value_of(&p.name)).collect()
}

pub(crate) fn trouble_of(error: EvaluationError, model: &Model, request: &Request) -> Trouble {
    match error {
        EvaluationError::Undetermined(element) => {
            let states = model.diffuse_elements() - request.drivers.len();
            let driver = match element.checked_sub(states) {
                Some(constant) => request.drivers.get(constant),
                None => match model.state_specs().iter().filter(|s| s.diffuse).nth(element).map(|s| s.role) {
                    Some(Role::Driver(drifting)) => request.drifting_drivers.get(drifting),
                    _ => None,
                },
            };
            match driver {
                Some(driver) => Trouble::CollinearDrivers { driver: driver.clone() },
                None => Trouble::Numerical {
                    what: "the observed points do not determine every part of the structure (a season with steps that are never observed?); use fewer harmonics, a simpler trend or no season",
                },
            }
        }
        EvaluationError::ExactFit => Trouble::ExactFit,
        EvaluationError::NotPositive => Trouble::Numerical {
            what: "the likelihood cannot be evaluated: no variance is above zero, or the values leave the range of double precision",
        },
        EvaluationError::NotStationary => Trouble::Numerical {
            what: "the known parameters of the autoregression or cycle are not stationary; choose smaller ones",
        },
    }
}

impl Fit {
    /// Notes whether the power of the transform was estimated.
    pub(crate) fn with_power(self, estimated: bool) -> Self {
        Self { power_estimated: estimated, ..self }
    }

    /// The structure that was fitted.
    pub fn structure(&self) -> &Structure {
        &self.structure
    }

    /// The scale of the model.
    pub fn transform(&self) -> Transform {
        self.transform
    }

    /// All parameters, known ones included, on the model scale.
    pub fn parameters(&self) -> &[Parameter] {
        &self.parameters
    }

    /// Likelihood evaluations that the estimation took.
    pub fn evaluations(&self) -> usize {
        self.estimate.evaluations
    }

    /// True when the estimation met its stopping rule.
    pub fn converged(&self) -> bool {
        self.estimate.converged
    }

    /// Coefficient of each constant driver and its standard error, model scale.
    pub fn coefficients(&self) -> Vec<(f64, f64)> {
        (0..self.drivers.0.len())
            .map(|i| {
                let (value, std_error) = self.evaluation.coefficient(i);
                (value * self.scaling.unit, std_error * self.scaling.unit)
            })
            .collect()
    }

    /// Checks and criteria of the fit.
    pub fn diagnostics(&self) -> Diagnostics {
        let evaluation = &self.evaluation;
        let (n, d) = (evaluation.observed(), evaluation.diffuse_elements());
        let w = self.parameters.iter().filter(|p| !p.known).count() + usize::from(self.power_estimated);
        let log_likelihood = evaluation.log_likelihood() + self.scaling.log_likelihood(n as f64 - d as f64);
        let one_step = evaluation.one_step();
        let standardised: Vec<f64> = one_step.standardised.iter().copied().filter(|e| !e.is_nan()).collect();
        let unit = self.scaling.unit;
        let errors: Vec<f64> =
            one_step.standardised.iter().zip(&one_step.variance).map(|(e, v)| e * v.sqrt() * unit).collect();
        let variances: Vec<f64> = one_step.variance.iter().map(|v| v * unit * unit).collect();
        let sse = checks::sum_of_squared_errors(&errors, &variances);
        let period = self.structure.seasons.first().map(|s| s.period);
        let lags = checks::default_lags(standardised.len(), period.unwrap_or(1.0));
        let q = checks::ljung_box(&standardised, lags, w);
        let h = checks::heteroskedasticity(&standardised);
        let (skewness, kurtosis) = (checks::skewness(&standardised), checks::kurtosis(&standardised));
        let normality = checks::bowman_shenton(&standardised);
        let first = self.modelled.iter().position(|v| !v.is_nan()).unwrap_or(0);
        Diagnostics {
            log_likelihood,
            aic: checks::aic(log_likelihood, w, d),
            bic: checks::bic(log_likelihood, w, d, n),
            n,
            missing: self.modelled.len() - first - n,
            diffuse: d,
            estimated: w,
            converged: self.estimate.converged,
            evaluations: self.estimate.evaluations,
            q: q.value,
            q_lags: lags,
            q_p: q.p_value,
            h: h.value,
            h_p: h.p_value,
            skewness: skewness.value,
            skewness_p: skewness.p_value,
            kurtosis: kurtosis.value,
            kurtosis_p: kurtosis.p_value,
            normality: normality.value,
            normality_p: normality.p_value,
            r_squared: checks::r_squared_drift(&self.modelled, sse),
            r_squared_season: period
                .map_or(f64::NAN, |p| checks::r_squared_season(&self.modelled, sse, p.round() as usize)),
        }
    }

    /// Standardised one-step errors along the grid; NaN where missing or where a point only determines a start.
    pub fn standardised_errors(&self) -> &[f64] {
        &self.evaluation.one_step().standardised
    }
}
