//! The result of `forecast`: one row per step of the horizon.

use stillwell_statespace::{Forecast, Trouble};

use super::components_rows::write_parts;
use super::groups::Key;
use super::result::{ColumnSpec, ResultRows, Unit};
use super::series::Placed;
use super::time_grid::TimeGrid;

/// The columns after the keys.
pub(crate) const COLUMNS: &[ColumnSpec] = &[
    ColumnSpec::time("at", "Time of the step: the grid goes on after the last observation."),
    ColumnSpec::count("step", Unit::Steps, "Steps after the last observation, from 1."),
    ColumnSpec::number("expected", Unit::Data, "Expected value."),
    ColumnSpec::number("std_error", Unit::Data, "Standard deviation of the value to come."),
    ColumnSpec::number(
        "lower",
        Unit::Data,
        "Lower end of the prediction interval at the coverage asked for.",
    ),
    ColumnSpec::number("upper", Unit::Data, "Upper end of the prediction interval."),
    ColumnSpec::number("level", Unit::Data, "Forecast of the level.").part(),
    ColumnSpec::number("level_se", Unit::Data, "Its standard error.").part(),
    ColumnSpec::number("slope", Unit::Slope, "Forecast of the slope.").part(),
    ColumnSpec::number("slope_se", Unit::Slope, "Its standard error.").part(),
    ColumnSpec::number("seasonal", Unit::Part, "Forecast of the seasonal patterns' sum.").part(),
    ColumnSpec::number("seasonal_se", Unit::Part, "Its standard error.").part(),
    ColumnSpec::number("cycle", Unit::Part, "Forecast of the cycle.").part(),
    ColumnSpec::number("cycle_se", Unit::Part, "Its standard error.").part(),
    ColumnSpec::number("autoregression", Unit::Part, "Forecast of the autoregression.").part(),
    ColumnSpec::number("autoregression_se", Unit::Part, "Its standard error.").part(),
    ColumnSpec::number("effect_of_<driver>", Unit::Part, "Effect of the driver's planned value.")
        .part()
        .each_driver(),
    ColumnSpec::number("effect_of_<driver>_se", Unit::Part, "Its standard error.").part().each_driver(),
    ColumnSpec::number("total_expected", Unit::Data, "Expected sum of steps 1 up to this one."),
    ColumnSpec::number(
        "total_lower",
        Unit::Data,
        "Lower end of that sum's interval (joint covariance of the steps).",
    ),
    ColumnSpec::number("total_upper", Unit::Data, "Upper end of that sum's interval."),
    ColumnSpec::text("status", "'ok', or what is wrong with the series."),
];

/// Writes the rows of a series that was fitted. `drivers`: names, constant coefficients first.
pub(crate) fn write(
    rows: &mut ResultRows,
    key: &Key,
    placed: &Placed,
    forecast: &Forecast,
    (parts, drivers): (bool, &[&String]),
) {
    let horizon = forecast.expected.len();
    rows.begin(key, horizon);
    rows.times("at", (0..horizon).map(|step| placed.time_at(placed.len() + step)));
    rows.counts("step", 1..=horizon);
    for (name, values) in [
        ("expected", &forecast.expected),
        ("std_error", &forecast.std_error),
        ("lower", &forecast.lower),
        ("upper", &forecast.upper),
        ("total_expected", &forecast.total_expected),
        ("total_lower", &forecast.total_lower),
        ("total_upper", &forecast.total_upper),
    ] {
        rows.numbers(name, values.iter().copied());
    }
    if parts {
        write_parts(rows, &forecast.parts, drivers);
    }
    rows.text("status", "ok");
    rows.end();
}

/// Writes the rows of a series in trouble: every step with its time where the grid is known (`base` is the
/// grid point of the last observation, or of the last row where there is none), one row otherwise.
pub(crate) fn write_trouble(
    rows: &mut ResultRows,
    key: &Key,
    horizon: usize,
    grid: Option<(&TimeGrid, usize)>,
    trouble: &Trouble,
) {
    match grid {
        Some((grid, base)) => {
            rows.begin(key, horizon);
            let point = |step: usize| base.checked_add(step).and_then(|point| grid.time_at(point));
            rows.times("at", (1..=horizon).map(point));
            rows.counts("step", 1..=horizon);
        }
        None => rows.begin(key, 1),
    }
    rows.text("status", trouble.status());
    rows.end();
}
