//! The result of `components`: one row per grid point of the history.

use stillwell_statespace::{Components, State, Trouble};

use super::groups::{Group, Key};
use super::result::{ColumnSpec, ResultRows, Unit, with_driver};
use super::series::Placed;

/// The columns after the keys.
pub(crate) const COLUMNS: &[ColumnSpec] = &[
    ColumnSpec::time("at", "Time of the grid point; gaps in the data are points too."),
    ColumnSpec::number("observed", Unit::Data, "The observed value; NULL where missing."),
    ColumnSpec::number(
        "level",
        Unit::Data,
        "Smoothed level: where the series stands without season and noise.",
    ),
    ColumnSpec::number("level_se", Unit::Data, "Standard error of the level."),
    ColumnSpec::number("slope", Unit::Slope, "Smoothed slope: what the level gains per step."),
    ColumnSpec::number("slope_se", Unit::Slope, "Standard error of the slope."),
    ColumnSpec::number("seasonal", Unit::Part, "Sum of the seasonal patterns at this point."),
    ColumnSpec::number("seasonal_se", Unit::Part, "Standard error of the seasonal pattern."),
    ColumnSpec::number("cycle", Unit::Part, "Stochastic cycle."),
    ColumnSpec::number("cycle_se", Unit::Part, "Standard error of the cycle."),
    ColumnSpec::number("autoregression", Unit::Part, "Autoregression at this point."),
    ColumnSpec::number("autoregression_se", Unit::Part, "Standard error of the autoregression."),
    ColumnSpec::number("effect_of_<driver>", Unit::Part, "What the driver contributes at this point.")
        .each_driver(),
    ColumnSpec::number("effect_of_<driver>_se", Unit::Part, "Standard error of that effect.").each_driver(),
    ColumnSpec::number(
        "irregular",
        Unit::Part,
        "Observed against fitted: difference, or ratio on a logarithmic scale.",
    ),
    ColumnSpec::number("fitted", Unit::Data, "The smoothed signal: the series without its irregular."),
    ColumnSpec::number("lower", Unit::Data, "Lower end of the signal's interval at the coverage asked for."),
    ColumnSpec::number("upper", Unit::Data, "Upper end of the signal's interval."),
    ColumnSpec::number(
        "outlier_t",
        Unit::TValue,
        "Auxiliary residual of the observation: beyond 3 or so in size, an outlier.",
    ),
    ColumnSpec::number(
        "shift_t",
        Unit::TValue,
        "Auxiliary residual of the level: beyond 3 or so in size, a shift that first shows here.",
    ),
    ColumnSpec::text("status", "'ok', or what is wrong with the series."),
];

/// Writes the rows of a series that was fitted. `drivers`: names, constant coefficients first.
pub(crate) fn write(
    rows: &mut ResultRows,
    key: &Key,
    placed: &Placed,
    components: &Components,
    drivers: &[&String],
) {
    rows.begin(key, placed.len());
    rows.times("at", placed.times());
    rows.numbers("observed", placed.series.observed.iter().copied());
    write_parts(rows, components, drivers);
    for (name, values) in [
        ("irregular", &components.irregular),
        ("fitted", &components.fitted),
        ("lower", &components.lower),
        ("upper", &components.upper),
        ("outlier_t", &components.outlier_t),
        ("shift_t", &components.shift_t),
    ] {
        rows.numbers(name, values.iter().copied());
    }
    rows.text("status", "ok");
    rows.end();
}

/// Writes the states and effects, which `forecast` has too.
pub(crate) fn write_parts(rows: &mut ResultRows, components: &Components, drivers: &[&String]) {
    let mut write = |name: &str, state: &State| {
        rows.numbers(name, state.value.iter().copied());
        rows.numbers(&format!("{name}_se"), state.std_error.iter().copied());
    };
    let states = [
        ("level", &components.level),
        ("slope", &components.slope),
        ("seasonal", &components.seasonal),
        ("cycle", &components.cycle),
        ("autoregression", &components.autoregression),
    ];
    for (name, state) in states {
        if let Some(state) = state {
            write(name, state);
        }
    }
    for (driver, effect) in drivers.iter().zip(&components.effects) {
        write(&with_driver("effect_of_<driver>", driver), effect);
    }
}

/// Writes the rows of a series in trouble: as they came in, with the status.
pub(crate) fn write_trouble(rows: &mut ResultRows, group: &Group, trouble: &Trouble) {
    rows.begin(&group.key, group.len());
    rows.times("at", group.times.iter().copied());
    rows.numbers("observed", group.observed.iter().copied());
    rows.text("status", trouble.status());
    rows.end();
}
