//! Every error a query can meet, said in one form: function, argument, what is wrong, what to do.
//!
//! Mistakes in a query are planning errors and begin with the name of the function. Troubles of single
//! series are not errors at all unless `on_trouble => 'fail'` asks for that; then the error names the series.

use datafusion::error::DataFusionError;
use stillwell_statespace::{BadRequest, Trouble};

use super::function::Function;

/// Whose mistake it is, and how an argument is written there.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Caller {
    /// A call in FROM: `season => 52`.
    Relation(Function),
    /// A function in an expression, by its name.
    Expression(&'static str),
    /// The struct of options of a function in an expression: `'season': 52`.
    Options(&'static str),
}

impl From<Function> for Caller {
    fn from(function: Function) -> Self {
        Self::Relation(function)
    }
}

impl Caller {
    /// The name of the function.
    pub(crate) fn name(self) -> &'static str {
        match self {
            Self::Relation(function) => function.name(),
            Self::Expression(name) | Self::Options(name) => name,
        }
    }

    /// What its arguments are called.
    fn noun(self) -> &'static str {
        match self {
            Self::Relation(_) | Self::Expression(_) => "argument",
            Self::Options(_) => "option",
        }
    }

    /// An argument and its value as people write them here.
    pub(crate) fn written(self, argument: &str, value: &str) -> String {
        match self {
            Self::Relation(_) | Self::Expression(_) => format!("{argument} => {value}"),
            Self::Options(_) => format!("'{argument}': {value}"),
        }
    }
}

/// A mistake in one argument. `what` continues the sentence "argument 'x' …".
pub(crate) fn bad_argument(
    caller: impl Into<Caller>,
    argument: &str,
    what: impl AsRef<str>,
) -> DataFusionError {
    let caller = caller.into();
    DataFusionError::Plan(format!("{}: {} '{argument}' {}", caller.name(), caller.noun(), what.as_ref()))
}

/// A mistake in a call as a whole.
pub(crate) fn bad_call(caller: impl Into<Caller>, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Plan(format!("{}: {}", caller.into().name(), what.as_ref()))
}

/// A request that no series could satisfy.
pub(crate) fn bad_request(caller: impl Into<Caller>, bad: &BadRequest) -> DataFusionError {
    let caller = caller.into();
    DataFusionError::Plan(format!("{}: {} '{}': {}", caller.name(), caller.noun(), bad.argument, bad.why))
}

/// A series in trouble under `on_trouble => 'fail'`. `key` is its key as text, empty without one.
pub(crate) fn failed_series(
    caller: impl Into<Caller>,
    key: &str,
    trouble: &Trouble,
    message: &str,
) -> DataFusionError {
    let series = if key.is_empty() { "the series".to_string() } else { format!("series {key}") };
    DataFusionError::Execution(format!("{}: {series}: {}: {message}", caller.into().name(), trouble.status()))
}

/// A call of a scalar function with arguments of a number or type it does not take.
pub(crate) fn wrong_call(function: &str, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Plan(format!("{function}: {}", what.as_ref()))
}

/// Checks the number of arguments of a call. `written` is how a call of the function is written.
///
/// # Errors
/// Any number that is not in `takes`.
pub(crate) fn counted(
    function: &str,
    written: &str,
    takes: std::ops::RangeInclusive<usize>,
    given: usize,
) -> Result<(), DataFusionError> {
    if takes.contains(&given) {
        return Ok(());
    }
    let (fewest, most) = (takes.start(), takes.end());
    let count = if fewest == most { most.to_string() } else { format!("{fewest} to {most}") };
    let plural = if *most == 1 { "" } else { "s" };
    Err(wrong_call(function, format!("takes {count} argument{plural}, not {given}; it is written {written}")))
}

/// A value that a scalar function cannot work with. `what` continues the sentence "argument 'x' …".
pub(crate) fn wrong_value(function: &str, argument: &str, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Execution(format!("{function}: argument '{argument}' {}", what.as_ref()))
}
