//! The relation functions this crate adds to SQL.

use crate::columns::result::ColumnSpec;
use crate::columns::{components_rows, diagnostics_rows, forecast_rows, state_space_rows};

/// A function that stands in FROM and takes a query.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Function {
    /// One row per grid point: where each series stands.
    Components,
    /// One row per step: what comes next.
    Forecast,
    /// One row per series: what was fitted and whether to believe it.
    Diagnostics,
    /// One row per grid point: the states of a system given as matrices.
    StateSpace,
}

impl Function {
    /// All of them, in the order of the documentation.
    pub const ALL: [Self; 4] = [Self::Components, Self::Forecast, Self::Diagnostics, Self::StateSpace];

    /// Its name in SQL.
    pub fn name(self) -> &'static str {
        match self {
            Self::Components => "components",
            Self::Forecast => "forecast",
            Self::Diagnostics => "diagnostics",
            Self::StateSpace => "state_space",
        }
    }

    /// The function of a (lower-case) name.
    pub fn from_name(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|function| function.name() == name)
    }

    /// Name of its node in a logical plan.
    pub(crate) fn node_name(self) -> &'static str {
        match self {
            Self::Components => "Components",
            Self::Forecast => "Forecast",
            Self::Diagnostics => "Diagnostics",
            Self::StateSpace => "StateSpace",
        }
    }

    /// Name of its operator in a physical plan.
    pub(crate) fn operator_name(self) -> &'static str {
        match self {
            Self::Components => "ComponentsExec",
            Self::Forecast => "ForecastExec",
            Self::Diagnostics => "DiagnosticsExec",
            Self::StateSpace => "StateSpaceExec",
        }
    }

    /// The columns of its result after the keys.
    pub fn columns(self) -> &'static [ColumnSpec] {
        match self {
            Self::Components => components_rows::COLUMNS,
            Self::Forecast => forecast_rows::COLUMNS,
            Self::Diagnostics => diagnostics_rows::COLUMNS,
            Self::StateSpace => state_space_rows::COLUMNS,
        }
    }
}
