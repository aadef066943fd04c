//! Arguments in one struct, `{'trend': 'local linear', 'season': 52}`: the options of functions in expressions.
//!
//! In an expression the engine lets nobody leave an argument out and give a later one, hence one struct for all
//! that is optional. Its fields are arguments of the relation functions, from the same table, read by the same code:
//! those that describe the model and what becomes of a series in trouble. The columns of a call in FROM are
//! arguments of their own there, except `drifting_drivers`, which here names fields of the struct of drivers.

use std::sync::Arc;

use datafusion::arrow::array::{Array, ArrayRef, RecordBatch, RecordBatchOptions};
use datafusion::arrow::datatypes::{DataType, Schema};
use datafusion::common::ScalarValue;
use datafusion::error::Result;
use datafusion::logical_expr::Expr;
use datafusion::physical_expr::PhysicalExpr;
use datafusion::physical_expr::utils::collect_columns;
use stillwell_statespace::calendar::Axis;

use super::constant::{Given, Value};
use super::settings::{Settings, Values};
use super::suggest::valid_and_nearest;
use super::{ARGUMENTS, Argument, Takes};
use crate::sql::error::{Caller, bad_argument, bad_call};
use crate::sql::function::Function;

/// The argument whose value names drivers here.
const DRIFTING: &str = "drifting_drivers";

/// What one function takes as options.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub(crate) struct OptionSet {
    /// The name of the function.
    pub(crate) function: &'static str,
    /// Arguments that would have no meaning for it.
    pub(crate) without: &'static [&'static str],
}

impl OptionSet {
    /// The arguments that may stand in the struct, in the order of [`ARGUMENTS`].
    pub(crate) fn arguments(self) -> impl Iterator<Item = &'static Argument> {
        ARGUMENTS.iter().filter(move |argument| {
            let value = matches!(argument.takes, Takes::Value | Takes::Constant)
                && argument.functions.contains(&Function::Components);
            (value || argument.name == DRIFTING) && !self.without.contains(&argument.name)
        })
    }

    fn caller(self) -> Caller {
        Caller::Options(self.function)
    }

    /// Checks what can be told from the type alone, while the query is planned: that it is a struct, or an untyped
    /// NULL for no options, and the names of its fields.
    ///
    /// # Errors
    /// Another type; names of no option, with those that are; names given twice.
    pub(crate) fn check_type(self, data_type: &DataType) -> Result<()> {
        let fields = match data_type {
            DataType::Null => return Ok(()),
            DataType::Struct(fields) => fields,
            other => {
                let what = format!(
                    "takes a struct, {{'trend': 'local linear', 'season': 52}} or named_struct('season', 52), but has \
                     type {other}"
                );
                return Err(bad_argument(Caller::Expression(self.function), "options", what));
            }
        };
        for (at, field) in fields.iter().enumerate() {
            self.find(field.name())?;
            if fields.iter().take(at).any(|other| other.name() == field.name()) {
                return Err(bad_argument(self.caller(), field.name(), "is given twice"));
            }
        }
        Ok(())
    }

    /// The option of this name.
    fn find(self, name: &str) -> Result<&'static Argument> {
        if let Some(argument) = self.arguments().find(|argument| argument.name == name) {
            return Ok(argument);
        }
        if matches!(name, "at" | "observed" | "drivers") {
            let what = format!("'{name}' is no option but an argument of its own, outside of the struct");
            return Err(bad_call(self.caller(), what));
        }
        let valid = self.arguments().map(|argument| argument.name).collect::<Vec<_>>();
        Err(bad_call(
            self.caller(),
            format!("there is no option '{name}'; {}", valid_and_nearest(name, &valid)),
        ))
    }

    /// The settings that a struct of options asks for. `axis` is that of the time, `drivers` the names of all
    /// drivers; those that the option `drifting_drivers` names come after the others in the request.
    ///
    /// # Errors
    /// Unknown options, values that an option does not take, contradictions, drivers that are none.
    pub(crate) fn read(self, options: &ScalarValue, axis: Axis, drivers: &[String]) -> Result<Settings> {
        self.check_type(&options.data_type())?;
        let mut given = Vec::new();
        let mut drifting = Vec::new();
        if let ScalarValue::Struct(options) = options
            && options.is_valid(0)
        {
            for (field, column) in options.fields().iter().zip(options.columns()) {
                let argument = self.find(field.name())?;
                let value = literal(ScalarValue::try_from_array(column, 0)?)?;
                if argument.name == DRIFTING {
                    drifting = self.drifting(&value, drivers)?;
                } else {
                    given.push((argument, value));
                }
            }
        }
        let constant = drivers.iter().filter(|name| !drifting.contains(name)).cloned().collect::<Vec<_>>();
        Values { caller: self.caller(), given: &given }.settings(axis, &constant, &drifting)
    }

    /// The drivers with a drifting coefficient, in the order of the drivers.
    fn drifting(self, given: &Given, drivers: &[String]) -> Result<Vec<String>> {
        let wrong = |value: &Value| {
            let what = format!("takes names of drivers, such as ['price'], not {value}");
            bad_argument(self.caller(), DRIFTING, what)
        };
        let value = given.value().unwrap_or(Value::Null);
        let mut named = Vec::new();
        for item in value.as_items() {
            let Value::Text(name) = item else { return Err(wrong(&value)) };
            if !drivers.contains(name) {
                let valid = drivers.iter().map(String::as_str).collect::<Vec<_>>();
                let what = match valid.is_empty() {
                    true => format!("names '{name}', but there are no drivers"),
                    false => {
                        format!("names '{name}', which is no driver; {}", valid_and_nearest(name, &valid))
                    }
                };
                return Err(bad_argument(self.caller(), DRIFTING, what));
            }
            named.push(name);
        }
        Ok(drivers.iter().filter(|driver| named.contains(driver)).cloned().collect())
    }
}

/// A field's value as an argument. `(8, 30)` in a struct is a struct of its own, with fields `c0` and `c1`.
fn literal(value: ScalarValue) -> Result<Given> {
    if let ScalarValue::Struct(items) = &value
        && items.is_valid(0)
        && items.fields().iter().enumerate().all(|(at, field)| *field.name() == format!("c{at}"))
    {
        let item = |column: &ArrayRef| Ok(Expr::Literal(ScalarValue::try_from_array(column, 0)?, None));
        return Ok(Given::new(items.columns().iter().map(item).collect::<Result<_>>()?, true));
    }
    Ok(Given::new(vec![Expr::Literal(value, None)], false))
}

/// The value of an argument that must be the same for all rows. It is evaluated, on one row without columns:
/// behind a foreign interface a literal cannot be recognised, and `1 + 1` is a constant too.
///
/// # Errors
/// An argument that depends on columns, or cannot be evaluated.
pub(crate) fn constant(
    function: &'static str,
    argument: &str,
    expr: &Arc<dyn PhysicalExpr>,
) -> Result<ScalarValue> {
    let not_constant = |why: String| {
        let what = format!("must be the same for all rows, {why}");
        bad_argument(Caller::Expression(function), argument, what)
    };
    if let Some(column) = collect_columns(expr).into_iter().min_by_key(|column| column.index()) {
        return Err(not_constant(format!("but depends on column '{}'", column.name())));
    }
    let one_row = RecordBatchOptions::new().with_row_count(Some(1));
    let row = RecordBatch::try_new_with_options(Arc::new(Schema::empty()), Vec::new(), &one_row)?;
    let value = expr.evaluate(&row).and_then(|value| value.into_array(1));
    value
        .and_then(|value| ScalarValue::try_from_array(&value, 0))
        .map_err(|error| not_constant(format!("but cannot be evaluated: {}", error.strip_backtrace())))
}

#[cfg(test)]
mod tests;
