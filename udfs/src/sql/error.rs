//! Every error a query can meet, said in one form: function, argument, what is wrong, what to do.
//!
//! Mistakes in a query are planning errors and begin with the name of the function. Troubles of single
//! series are not errors at all unless `on_trouble => 'fail'` asks for that; then the error names the series.

use datafusion::error::DataFusionError;
use stillwell_statespace::{BadRequest, Trouble};

use super::function::Function;

/// A mistake in one argument. `what` continues the sentence "argument 'x' …".
pub(crate) fn bad_argument(function: Function, argument: &str, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Plan(format!("{}: argument '{argument}' {}", function.name(), what.as_ref()))
}

/// A mistake in a call as a whole.
pub(crate) fn bad_call(function: Function, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Plan(format!("{}: {}", function.name(), what.as_ref()))
}

/// A request that no series could satisfy.
pub(crate) fn bad_request(function: Function, bad: &BadRequest) -> DataFusionError {
    DataFusionError::Plan(format!("{}: {bad}", function.name()))
}

/// A series in trouble under `on_trouble => 'fail'`. `key` is its key as text, empty without one.
pub(crate) fn failed_series(
    function: Function,
    key: &str,
    trouble: &Trouble,
    message: &str,
) -> DataFusionError {
    let series = if key.is_empty() { "the series".to_string() } else { format!("series {key}") };
    DataFusionError::Execution(format!("{}: {series}: {}: {message}", function.name(), trouble.status()))
}

/// A call of a scalar function with arguments of a number or type it does not take.
pub(crate) fn wrong_call(function: &str, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Plan(format!("{function}: {}", what.as_ref()))
}

/// A value that a scalar function cannot work with. `what` continues the sentence "argument 'x' …".
pub(crate) fn wrong_value(function: &str, argument: &str, what: impl AsRef<str>) -> DataFusionError {
    DataFusionError::Execution(format!("{function}: argument '{argument}' {}", what.as_ref()))
}
