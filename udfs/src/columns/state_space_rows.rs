//! The result of `state_space`: one row per grid point, from the first observation to the last row.

use stillwell_statespace::GeneralFit;

use super::groups::Key;
use super::result::{ColumnSpec, ResultRows, Unit, with_number};
use super::series::Placed;

/// The columns after the keys.
pub(crate) const COLUMNS: &[ColumnSpec] = &[
    ColumnSpec::time(
        "at",
        "Time of the grid point; gaps in the data and rows after the last observation are points too.",
    ),
    ColumnSpec::number("observed", Unit::Data, "The observed value; NULL where missing."),
    ColumnSpec::number("state_<n>", Unit::State, "Smoothed state; after the last observation its forecast.")
        .each_state(),
    ColumnSpec::number("state_<n>_se", Unit::State, "Standard error of that state.").each_state(),
    ColumnSpec::number("irregular", Unit::Data, "Observed less fitted."),
    ColumnSpec::number("fitted", Unit::Data, "The smoothed signal d + z times the states."),
    ColumnSpec::number("lower", Unit::Data, "Lower end of the signal's interval at the coverage asked for."),
    ColumnSpec::number("upper", Unit::Data, "Upper end of the signal's interval."),
    ColumnSpec::number("h", Unit::Variance, "Irregular variance, given or estimated."),
    ColumnSpec::number("h_se", Unit::Variance, "Its standard error; NULL at zero or where given."),
    ColumnSpec::number("q_<n>", Unit::State, "Variance of that disturbance, given or estimated.")
        .each_disturbance(),
    ColumnSpec::number("q_<n>_se", Unit::State, "Its standard error.").each_disturbance(),
    ColumnSpec::number(
        "log_likelihood",
        Unit::Nats,
        "Diffuse log-likelihood with -(n - diffuse)/2 log 2 pi, the same in every row.",
    ),
    ColumnSpec::flag("converged", "The estimation met its stopping rule."),
    ColumnSpec::text("status", "'ok', or what is wrong with the series."),
];

/// Writes the rows of a series that was fitted.
pub(crate) fn write(rows: &mut ResultRows, key: &Key, placed: &Placed, fit: &GeneralFit) {
    let points = placed.len() + placed.tail();
    rows.begin(key, points);
    rows.times("at", (0..points).map(|index| placed.time_at(index)));
    let missing = std::iter::repeat_n(f64::NAN, placed.tail());
    rows.numbers("observed", placed.series.observed.iter().copied().chain(missing));
    for (at, state) in fit.states.iter().enumerate() {
        rows.numbers(&with_number("state_<n>", at + 1), state.value.iter().copied());
        rows.numbers(&with_number("state_<n>_se", at + 1), state.std_error.iter().copied());
    }
    for (name, values) in
        [("irregular", &fit.irregular), ("fitted", &fit.fitted), ("lower", &fit.lower), ("upper", &fit.upper)]
    {
        rows.numbers(name, values.iter().copied());
    }
    for variance in &fit.variances {
        rows.number(&variance.name, variance.value);
        rows.number(&format!("{}_se", variance.name), variance.std_error);
    }
    rows.number("log_likelihood", fit.log_likelihood);
    rows.flag("converged", fit.converged);
    rows.text("status", "ok");
    rows.end();
}
