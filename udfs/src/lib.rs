//! Structural time series in SQL: level, slope, season, forecasts and checks of every series in a table,
//! as functions of a [DataFusion](https://datafusion.apache.org) session.
//!
//! ```
//! use datafusion::prelude::SessionContext;
//!
//! # #[tokio::main(flavor = "current_thread")]
//! # async fn main() -> datafusion::error::Result<()> {
//! let context = SessionContext::new();
//! stillwell::register(&context)?;
//! let outlook = context
//!     .sql(
//!         "SELECT at, step, round(expected) AS expected
//!          FROM forecast(
//!              data     => (SELECT value AS month, 100 + 3 * value + (value % 4) AS litres
//!                           FROM generate_series(1, 48)),
//!              at       => month,
//!              observed => litres,
//!              season   => 4,
//!              horizon  => 2)",
//!     )
//!     .await?
//!     .collect()
//!     .await?;
//! assert_eq!(outlook.iter().map(|batch| batch.num_rows()).sum::<usize>(), 2);
//! # Ok(())
//! # }
//! ```
//!
//! [`register`] adds the functions to a session, [`extend`] to one that is still being built. A host with a
//! query planner of its own adds [`StructuralExtensionPlanner`] to it. [`Progress`] lets a host watch,
//! [`InPlace`] says on which threads the fits are done.
//! [`functions`] describes every function that stands in FROM, with its arguments and columns,
//! [`value_functions`] those that stand in expressions.

mod columns;
mod sql;

pub use columns::fit_value::FIT_LAYOUT;
pub use columns::result::{ColumnKind, ColumnScope, ColumnSpec, Scale, Unit};
pub use sql::{
    ARGUMENTS, Argument, ColumnDoc, Function, FunctionDoc, InPlace, Progress, StructuralExtensionPlanner,
    StructuralQueryPlanner, StructuralRelationPlanner, Takes, TroubledSeries, ValueFunctionDoc,
    ValueFunctionKind, arguments_of, extend, functions, register, register_relations, statuses,
    value_functions,
};
