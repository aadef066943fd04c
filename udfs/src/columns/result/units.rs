//! The units of result columns, as the `unit` entry of Arrow field metadata.
//!
//! On an untransformed model everything is in the unit of the observed column and adds up. On a logarithmic
//! one the level stays in that unit, while seasonal patterns, cycles, effects and the irregular become
//! factors and the slope a growth rate. With `transform => 'auto'` each series decides for itself (column
//! `transform` of `diagnostics`), which the metadata then says.

/// The scale on which the components of a result stand, as far as it is known before the data are seen.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Scale {
    /// `transform => 'none'`.
    Data,
    /// `transform => 'log'` or `'log1p'`.
    Log,
    /// `transform => 'box-cox'` or a power.
    BoxCox,
    /// `transform => 'auto'`: one or the other, series by series.
    BySeries,
}

/// The unit of a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Unit {
    /// A moment, as in the input.
    Time,
    /// Words, names, flags: no unit.
    Words,
    /// The unit of the observed column, on every scale.
    Data,
    /// Data's unit, or a factor on a logarithmic model.
    Part,
    /// Data's unit per step, or growth per step on a logarithmic model.
    Slope,
    /// A variance on the model's scale.
    Variance,
    /// Whatever the matrices make of a state.
    State,
    /// Model's scale per unit of a driver.
    Coefficient,
    /// Steps of the grid.
    Steps,
    /// Something counted.
    Count,
    /// A value over its standard error.
    TValue,
    /// A probability between 0 and 1.
    Probability,
    /// A pure number.
    Number,
    /// Natural units of information.
    Nats,
}

impl Unit {
    /// Its text; none for words and times.
    pub fn text(self, scale: Scale) -> Option<&'static str> {
        Some(match (self, scale) {
            (Self::Time | Self::Words, _) => return None,
            (Self::Data, _) | (Self::Part, Scale::Data) => "data",
            (Self::Part, Scale::Log) => "factor",
            (Self::Part, Scale::BoxCox) => "transformed",
            (Self::Part, Scale::BySeries) => "data or factor",
            (Self::Slope, Scale::Data) => "data per step",
            (Self::Slope, Scale::Log) => "growth per step",
            (Self::Slope, Scale::BoxCox) => "transformed per step",
            (Self::Slope, Scale::BySeries) => "data or growth per step",
            (Self::Variance, Scale::Data) => "data squared",
            (Self::Variance, Scale::Log) => "log squared",
            (Self::Variance, Scale::BoxCox) => "transformed squared",
            (Self::Variance, Scale::BySeries) => "data or log squared",
            (Self::Coefficient, Scale::Data) => "data per unit of the driver",
            (Self::Coefficient, Scale::Log) => "log per unit of the driver",
            (Self::Coefficient, Scale::BoxCox) => "transformed per unit of the driver",
            (Self::Coefficient, Scale::BySeries) => "data or log per unit of the driver",
            (Self::State, _) => "state",
            (Self::Steps, _) => "steps",
            (Self::Count, _) => "count",
            (Self::TValue, _) => "t-value",
            (Self::Probability, _) => "probability",
            (Self::Number, _) => "number",
            (Self::Nats, _) => "nats",
        })
    }
}
