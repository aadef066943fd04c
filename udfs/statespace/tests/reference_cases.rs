//! All 55 reference cases at given parameters against values from 50-digit arithmetic. One test prints the table
//! (case, worst differences): `cargo test -p stillwell-statespace --test reference_cases -- --nocapture`.

mod support;

use serde_json::Value;
use stillwell_statespace::structure::Role;
use stillwell_statespace::{Evaluation, EvaluationError, State};
use support::{Case, numbers};

/// Log-likelihood: absolute, or relative where that is larger.
const LOG_LIKELIHOOD: (f64, f64) = (1e-8, 1e-10);
/// Smoothed states and forecasts, in standard deviations of the series.
const STATES: f64 = 1e-8;
/// Variances of states and forecasts, relative.
const VARIANCES: f64 = 1e-8;
/// Standardised one-step errors, absolute.
const ERRORS: f64 = 1e-8;

/// The larger of two differences; one that is not a number is as large as can be.
fn larger(a: f64, b: f64) -> f64 {
    if b.is_nan() { f64::INFINITY } else { a.max(b) }
}

#[derive(Default)]
struct Worst {
    log_likelihood: f64,
    states: f64,
    variances: f64,
    forecasts: f64,
    forecast_variances: f64,
    errors: f64,
}

impl Worst {
    fn states(&mut self, ours: &State, reference: &serde_json::Value, unit: f64) {
        let (mean, var) = (numbers(&reference["mean"]), numbers(&reference["var"]));
        for t in 0..mean.len() {
            self.states = larger(self.states, (ours.value[t] - mean[t]).abs() / unit);
            // A variance that is zero in truth (1e-36 in 50 digits) is compared on the scale of the series.
            let size = if var[t] > 1e-20 * unit * unit { var[t] } else { unit * unit };
            self.variances = larger(self.variances, (ours.std_error[t].powi(2) - var[t]).abs() / size);
        }
    }
}

fn compare(case: &Case) -> Worst {
    let fixed = &case.json["fixed"];
    let evaluation = case.evaluate(&fixed["params"]).expect("the case can be evaluated");
    let mut worst = Worst::default();
    let reference = fixed["loglik_nd"].as_f64().expect("a number");
    let slack = 1.0_f64.max(reference.abs() * LOG_LIKELIHOOD.1 / LOG_LIKELIHOOD.0);
    worst.log_likelihood = (evaluation.log_likelihood() - reference).abs() / slack;
    assert_eq!(
        evaluation.diffuse_elements() as u64,
        fixed["n_diffuse"].as_u64().expect("a count"),
        "{}",
        case.id
    );
    assert_eq!(evaluation.observed() as u64, fixed["n_obs"].as_u64().expect("a count"), "{}", case.id);
    let unit = sd(&case.series.observed);
    for (name, reference) in fixed["smoothed"].as_object().expect("components") {
        let role = match name.as_str() {
            "level" => Role::Level,
            "slope" => Role::Slope,
            "seasonal" => Role::Season,
            "cycle" => Role::Cycle,
            "ar" => Role::Autoregression,
            "signal" => {
                worst.states(&evaluation.signal(), reference, unit);
                continue;
            }
            // The sum of all driver effects; each coefficient is compared on its own.
            "regression" => continue,
            beta => {
                let driver = beta.strip_prefix("beta.").expect("a coefficient");
                if let Some(i) = case.structure.drifting_drivers.iter().position(|d| d == driver) {
                    Role::Driver(i)
                } else {
                    let i = case.drivers.iter().position(|d| d == driver).expect("a driver");
                    let (value, std_error) = evaluation.coefficient(i);
                    let n = case.series.observed.len();
                    let state = State { value: vec![value; n], std_error: vec![std_error; n] };
                    worst.states(&state, reference, unit);
                    continue;
                }
            }
        };
        worst.states(&evaluation.component(role).expect("the component"), reference, unit);
    }
    let (mean, var) = (numbers(&fixed["forecast"]["mean"]), numbers(&fixed["forecast"]["var"]));
    let signal_var = numbers(&fixed["forecast"]["signal_var"]);
    let (m, v, s) = evaluation.forecast(mean.len());
    for i in 0..mean.len() {
        worst.forecasts = larger(worst.forecasts, (m[i] - mean[i]).abs() / unit);
        for (ours, reference) in [(v[i], var[i]), (s[i], signal_var[i])] {
            worst.forecast_variances = larger(worst.forecast_variances, (ours / reference - 1.0).abs());
        }
    }
    let errors = numbers(&fixed["std_resid"]);
    for (t, (ours, reference)) in evaluation.one_step().standardised.iter().zip(&errors).enumerate() {
        assert_eq!(
            ours.is_nan(),
            reference.is_nan(),
            "{}: which points determine a start value, t = {t}",
            case.id
        );
        if !reference.is_nan() {
            worst.errors = larger(worst.errors, (ours - reference).abs());
        }
    }
    worst
}

#[test]
fn every_case_at_given_parameters() {
    let cases = support::all();
    assert_eq!(cases.len(), 55);
    println!(
        "{:42} {:>9} {:>9} {:>9} {:>9} {:>9} {:>9}",
        "case", "loglik", "states", "variance", "forecast", "fc. var", "errors"
    );
    let mut failed = Vec::new();
    for case in &cases {
        let w = compare(case);
        println!(
            "{:42} {:9.1e} {:9.1e} {:9.1e} {:9.1e} {:9.1e} {:9.1e}",
            case.id, w.log_likelihood, w.states, w.variances, w.forecasts, w.forecast_variances, w.errors
        );
        let within = w.log_likelihood <= LOG_LIKELIHOOD.0
            && w.states <= STATES
            && w.variances <= VARIANCES
            && w.forecasts <= STATES
            && w.forecast_variances <= VARIANCES
            && w.errors <= ERRORS;
        if !within {
            failed.push(case.id.clone());
        }
    }
    assert!(failed.is_empty(), "outside the tolerances: {failed:?}");
}

/// Standard deviation of the observed values.
fn sd(values: &[f64]) -> f64 {
    let seen: Vec<f64> = values.iter().copied().filter(|v| !v.is_nan()).collect();
    let mean = seen.iter().sum::<f64>() / seen.len() as f64;
    (seen.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / seen.len() as f64).sqrt()
}

impl Case {
    /// Values of the model's parameters in a `params` block of the case.
    fn values(&self, params: &Value) -> Vec<f64> {
        let model = self.structure.model();
        let get = |name: &str| params[name].as_f64().unwrap_or(0.0);
        model
            .parameters()
            .iter()
            .map(|p| match p.name.as_str() {
                "irregular" => get("sigma2.irregular"),
                "level" => get("sigma2.level"),
                "slope" => get("sigma2.slope"),
                "season" => get("sigma2.seasonal"),
                "slope_damping" => get("phi.slope"),
                "cycle" => get("sigma2.cycle"),
                "cycle_damping" => get("rho.cycle"),
                "cycle_period" => std::f64::consts::TAU / get("frequency.cycle"),
                "autoregression" => get("sigma2.ar"),
                "ar_1" => get("phi.ar"),
                driver => get(&format!("sigma2.beta.{driver}")),
            })
            .collect()
    }

    fn evaluate(&self, params: &Value) -> Result<Evaluation, EvaluationError> {
        let (model, values) = (self.structure.model(), self.values(params));
        if !self.diffuse_start {
            return Evaluation::new(model, &values, self.series.clone());
        }
        let mut system = model.system_at(&values)?;
        for start in std::mem::take(&mut system.proper) {
            system.diffuse.extend(start.offset..start.offset + start.size);
        }
        system.diffuse.sort_unstable();
        Evaluation::with_system(model, system, self.series.clone())
    }
}
