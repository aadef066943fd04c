//! The result of `diagnostics`: one row per series.

use stillwell_statespace::structure::{Structure, period_label};
use stillwell_statespace::{Components, Diagnostics, Parameter, Transform, Trouble};

use super::groups::{Group, Key};
use super::result::{ColumnSpec, ResultRows, Unit, with_driver};
use super::series::Placed;

/// The columns after the keys.
pub(crate) const COLUMNS: &[ColumnSpec] = &[
    ColumnSpec::text("trend", "Form of the trend, in the words of the argument."),
    ColumnSpec::text(
        "season",
        "Periods of the seasons in steps, such as '52.18' or '7, 365.25'; 'none' without.",
    ),
    ColumnSpec::text(
        "harmonics",
        "Harmonics of each season, or 'dummy' for the dummy form; NULL without a season.",
    ),
    ColumnSpec::text("transform", "Scale of the model: 'none', 'log', 'log1p' or 'box-cox'."),
    ColumnSpec::number(
        "transform_power",
        Unit::Number,
        "Power of 'box-cox', given or estimated: transform => with this number gives the same model.",
    ),
    ColumnSpec::text("every", "Step of the grid in words, such as 'week' or 'month end'."),
    ColumnSpec::time("first_at", "Time of the first observation."),
    ColumnSpec::time("last_at", "Time of the last observation."),
    ColumnSpec::count("n", Unit::Count, "Observed points."),
    ColumnSpec::count("missing", Unit::Count, "Missing points between the first and the last observation."),
    ColumnSpec::count("diffuse", Unit::Count, "Diffuse elements: states and coefficients with a flat start."),
    ColumnSpec::count("estimated", Unit::Count, "Estimated parameters."),
    ColumnSpec::number("irregular_variance", Unit::Variance, "Variance of the irregular."),
    ColumnSpec::number(
        "irregular_variance_se",
        Unit::Variance,
        "Its standard error; NULL at zero or where given.",
    ),
    ColumnSpec::number("level_variance", Unit::Variance, "Variance of the level's disturbance."),
    ColumnSpec::number("level_variance_se", Unit::Variance, "Its standard error."),
    ColumnSpec::number("slope_variance", Unit::Variance, "Variance of the slope's disturbance."),
    ColumnSpec::number("slope_variance_se", Unit::Variance, "Its standard error."),
    ColumnSpec::number("season_variance", Unit::Variance, "Variance of the seasonal disturbance."),
    ColumnSpec::number("season_variance_se", Unit::Variance, "Its standard error."),
    ColumnSpec::number("cycle_variance", Unit::Variance, "Variance of the cycle's disturbance."),
    ColumnSpec::number("cycle_variance_se", Unit::Variance, "Its standard error."),
    ColumnSpec::number(
        "autoregression_variance",
        Unit::Variance,
        "Variance of the autoregression's disturbance.",
    ),
    ColumnSpec::number("autoregression_variance_se", Unit::Variance, "Its standard error."),
    ColumnSpec::number("variance_of_<driver>", Unit::Variance, "Variance of the coefficient's steps.")
        .each_drifting_driver(),
    ColumnSpec::number("variance_of_<driver>_se", Unit::Variance, "Its standard error.")
        .each_drifting_driver(),
    ColumnSpec::number("slope_damping", Unit::Number, "Damping of the slope (trend 'damped')."),
    ColumnSpec::number("slope_damping_se", Unit::Number, "Its standard error."),
    ColumnSpec::number("cycle_period", Unit::Steps, "Period of the cycle."),
    ColumnSpec::number("cycle_period_se", Unit::Steps, "Its standard error."),
    ColumnSpec::number("cycle_damping", Unit::Number, "Damping of the cycle."),
    ColumnSpec::number("cycle_damping_se", Unit::Number, "Its standard error."),
    ColumnSpec::number(
        "level_to_irregular",
        Unit::Number,
        "Signal to noise: level variance over irregular variance.",
    ),
    ColumnSpec::number("slope_to_irregular", Unit::Number, "Slope variance over irregular variance."),
    ColumnSpec::number("season_to_irregular", Unit::Number, "Season variance over irregular variance."),
    ColumnSpec::number("coefficient_of_<driver>", Unit::Coefficient, "Coefficient at the last point.")
        .each_driver(),
    ColumnSpec::number("coefficient_of_<driver>_se", Unit::Coefficient, "Its standard error.").each_driver(),
    ColumnSpec::number("coefficient_of_<driver>_t", Unit::TValue, "The one over the other.").each_driver(),
    ColumnSpec::number(
        "log_likelihood",
        Unit::Nats,
        "Diffuse log-likelihood of the transformed data with -(n - diffuse)/2 log 2 pi.",
    ),
    ColumnSpec::number("aic", Unit::Nats, "-2 log_likelihood + 2 (estimated + diffuse)."),
    ColumnSpec::number("bic", Unit::Nats, "-2 log_likelihood + (estimated + diffuse) log n."),
    ColumnSpec::flag("converged", "The estimation met its stopping rule."),
    ColumnSpec::count("evaluations", Unit::Count, "Likelihood evaluations that took."),
    ColumnSpec::number(
        "q",
        Unit::Number,
        "Ljung-Box statistic of the one-step errors: left-over autocorrelation.",
    ),
    ColumnSpec::count("q_lags", Unit::Count, "Lags in it."),
    ColumnSpec::number("q_p", Unit::Probability, "Its p-value."),
    ColumnSpec::number("h", Unit::Number, "Squared errors of the last third over those of the first."),
    ColumnSpec::number("h_p", Unit::Probability, "Its two-sided p-value: does the spread change?"),
    ColumnSpec::number("skewness", Unit::Number, "Skewness of the errors."),
    ColumnSpec::number("skewness_p", Unit::Probability, "Its two-sided p-value."),
    ColumnSpec::number("kurtosis", Unit::Number, "Kurtosis of the errors, 3 for the normal distribution."),
    ColumnSpec::number("kurtosis_p", Unit::Probability, "Its two-sided p-value."),
    ColumnSpec::number("normality", Unit::Number, "Bowman-Shenton statistic."),
    ColumnSpec::number("normality_p", Unit::Probability, "Its p-value."),
    ColumnSpec::number(
        "r_squared",
        Unit::Number,
        "Share of the errors of a random walk with drift that is explained.",
    ),
    ColumnSpec::number(
        "r_squared_season",
        Unit::Number,
        "The same against a seasonal one; NULL without a season.",
    ),
    ColumnSpec::text("status", "'ok', or what is wrong with the series."),
    ColumnSpec::text("message", "The sentence about it, with value, place and remedy."),
];

/// What `diagnostics` says about a fit.
#[derive(Debug)]
pub(crate) struct Findings<'a> {
    pub(crate) structure: &'a Structure,
    pub(crate) transform: Transform,
    pub(crate) parameters: &'a [Parameter],
    pub(crate) diagnostics: &'a Diagnostics,
    /// Only looked at for the coefficients of drivers.
    pub(crate) components: Option<&'a Components>,
}

/// Writes the row of a series that was fitted. `drivers`: names, constant coefficients first.
pub(crate) fn write(
    rows: &mut ResultRows,
    key: &Key,
    placed: &Placed,
    findings: &Findings<'_>,
    (drivers, drifting): (&[&String], &[String]),
) {
    let found = findings.diagnostics;
    rows.begin(key, 1);
    rows.text("trend", findings.structure.trend.name());
    write_seasons(rows, findings.structure);
    rows.text("transform", findings.transform.name());
    rows.number("transform_power", findings.transform.power().unwrap_or(f64::NAN));
    write_span(rows, placed);
    write_parameters(rows, findings.parameters, drifting);
    if let Some(components) = findings.components {
        for (driver, coefficient) in drivers.iter().zip(&components.coefficients) {
            let value = coefficient.value.last().copied().unwrap_or(f64::NAN);
            let std_error = coefficient.std_error.last().copied().unwrap_or(f64::NAN);
            rows.number(&with_driver("coefficient_of_<driver>", driver), value);
            rows.number(&with_driver("coefficient_of_<driver>_se", driver), std_error);
            let t = if std_error > 0.0 { value / std_error } else { f64::NAN };
            rows.number(&with_driver("coefficient_of_<driver>_t", driver), t);
        }
    }
    for (name, value) in [
        ("n", found.n),
        ("missing", found.missing),
        ("diffuse", found.diffuse),
        ("estimated", found.estimated),
        ("evaluations", found.evaluations),
        ("q_lags", found.q_lags),
    ] {
        rows.counts(name, [value]);
    }
    for (name, value) in [
        ("log_likelihood", found.log_likelihood),
        ("aic", found.aic),
        ("bic", found.bic),
        ("q", found.q),
        ("q_p", found.q_p),
        ("h", found.h),
        ("h_p", found.h_p),
        ("skewness", found.skewness),
        ("skewness_p", found.skewness_p),
        ("kurtosis", found.kurtosis),
        ("kurtosis_p", found.kurtosis_p),
        ("normality", found.normality),
        ("normality_p", found.normality_p),
        ("r_squared", found.r_squared),
        ("r_squared_season", found.r_squared_season),
    ] {
        rows.number(name, value);
    }
    rows.flag("converged", found.converged);
    rows.text("status", "ok");
    rows.end();
}

/// Writes the row of a series in trouble, with what is known about it.
pub(crate) fn write_trouble(
    rows: &mut ResultRows,
    group: &Group,
    placed: Option<&Placed>,
    (trouble, message): (&Trouble, &str),
) {
    rows.begin(&group.key, 1);
    match placed {
        Some(placed) => {
            write_span(rows, placed);
            let missing = placed.series.observed.iter().filter(|value| value.is_nan()).count();
            rows.counts("n", [placed.len() - missing]);
            rows.counts("missing", [missing]);
        }
        None => rows.counts("n", [group.observed.iter().filter(|value| !value.is_nan()).count()]),
    }
    rows.text("status", trouble.status());
    rows.text("message", message);
    rows.end();
}

/// Grid, first and last observation.
fn write_span(rows: &mut ResultRows, placed: &Placed) {
    rows.text("every", &placed.grid().grid().describe());
    rows.times("first_at", [placed.time_at(0)]);
    rows.times("last_at", [placed.len().checked_sub(1).and_then(|last| placed.time_at(last))]);
}

fn write_seasons(rows: &mut ResultRows, structure: &Structure) {
    if structure.seasons.is_empty() {
        rows.text("season", "none");
        return;
    }
    let periods = structure.seasons.iter().map(|season| period_label(season.period)).collect::<Vec<_>>();
    let harmonics = structure.seasons.iter().map(|season| match season.harmonics {
        Some(count) => count.to_string(),
        None => "dummy".to_string(),
    });
    rows.text("season", &periods.join(", "));
    rows.text("harmonics", &harmonics.collect::<Vec<_>>().join(", "));
}

/// Variances, damping, signal-to-noise ratios.
fn write_parameters(rows: &mut ResultRows, parameters: &[Parameter], drifting: &[String]) {
    for parameter in parameters {
        let name = match parameter.name.as_str() {
            whole @ ("slope_damping" | "cycle_damping" | "cycle_period") => whole.to_string(),
            driver if drifting.iter().any(|name| name == driver) => {
                with_driver("variance_of_<driver>", driver)
            }
            component => format!("{component}_variance"),
        };
        // Parameters that come in any number (a season per period, the coefficients of an autoregression)
        // have no column: columns must not depend on the data.
        if rows.has(&name) {
            rows.number(&name, parameter.value);
            rows.number(&format!("{name}_se"), parameter.std_error);
        }
    }
    let value =
        |name: &str| parameters.iter().find(|parameter| parameter.name == name).map(|found| found.value);
    let irregular = value("irregular").filter(|&irregular| irregular > 0.0);
    for name in ["level", "slope", "season"] {
        if let (Some(variance), Some(irregular)) = (value(name), irregular) {
            rows.number(&format!("{name}_to_irregular"), variance / irregular);
        }
    }
}
