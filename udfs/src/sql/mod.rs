//! Structural time series in the SQL of a DataFusion session.
//!
//! A call in FROM becomes, step by step, a stream of results:
//!
//! 1. [`relation`] reads the call, with the one table of [`arguments`], and builds
//! 2. a [`node`] of the logical plan, through which predicates on keys pass; [`planner`] turns it into
//! 3. an [`operator`] that asks for rows by key and time; its [`stream`] cuts them into series, and
//! 4. [`work`] fits these on blocking threads and writes the rows of the result.
//!
//! Functions for expressions (scalar, aggregate, window) stand in the lists of [`registry`]: those of the [`calendar`],
//! from which a query makes drivers, [`fits`] as values, and [`structural_components`]. The last two share the arguments,
//! the series and [`fitting`] with the operator.
//!
//! [`session`] puts all this into a session; [`docs`] describes the functions for people.

mod arguments;
mod calendar;
mod docs;
mod error;
mod fits;
mod fitting;
mod function;
mod in_order;
mod in_place;
mod metrics;
mod node;
mod operator;
mod parameters;
mod planner;
mod progress;
mod registry;
mod relation;
mod series_inputs;
mod session;
mod stream;
mod structural_components;
mod watch;
mod work;

pub use arguments::{ARGUMENTS, Argument, Takes, arguments_of};
pub use docs::{
    ColumnDoc, FunctionDoc, ValueFunctionDoc, ValueFunctionKind, functions, statuses, value_functions,
};
pub use function::Function;
pub use in_place::InPlace;
pub use planner::{StructuralExtensionPlanner, StructuralQueryPlanner};
pub use progress::{Progress, TroubledSeries};
pub use relation::StructuralRelationPlanner;
pub use session::{extend, register, register_relations};
