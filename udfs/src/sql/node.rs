//! The node of the logical plan: a function over one input.
//!
//! Predicates on key columns pass through it, down to the files; predicates on anything else stay above,
//! because a shorter history is another series. Values that are still parameters of a prepared statement are
//! expressions of the node, so that the engine fills them in.

mod conditions;

use std::cmp::Ordering;
use std::collections::{BTreeSet, HashSet};
use std::fmt;
use std::hash::{Hash, Hasher};
use std::sync::Arc;

use datafusion::arrow::datatypes::FieldRef;
use datafusion::common::{Column, DFSchema, DFSchemaRef};
use datafusion::error::Result;
use datafusion::logical_expr::{Expr, LogicalPlan, UserDefinedLogicalNodeCore};

use super::arguments::Argument;
use super::arguments::constant::Given;
use super::arguments::settings::{Settings, Values};
use super::error::{bad_argument, bad_call};
use super::function::Function;
use crate::columns::result::{Layout, ResultSchema};
use crate::columns::time::TimeKind;

/// A driver: its name in the result and its column in the input.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Hash)]
pub(crate) struct Driver {
    pub(crate) name: String,
    pub(crate) column: Column,
}

/// Which column of the input plays which part.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Hash)]
pub(crate) struct Roles {
    pub(crate) keys: Vec<Column>,
    pub(crate) at: Column,
    pub(crate) observed: Column,
    pub(crate) drivers: Vec<Driver>,
    pub(crate) drifting_drivers: Vec<Driver>,
}

impl Roles {
    /// All columns, keys first.
    pub(crate) fn columns(&self) -> impl Iterator<Item = &Column> {
        let drivers = self.drivers.iter().chain(&self.drifting_drivers).map(|driver| &driver.column);
        self.keys.iter().chain([&self.at, &self.observed]).chain(drivers)
    }

    /// Names of the drivers with constant and with drifting coefficients.
    pub(crate) fn driver_names(&self) -> (Vec<String>, Vec<String>) {
        let names = |drivers: &[Driver]| drivers.iter().map(|driver| driver.name.clone()).collect();
        (names(&self.drivers), names(&self.drifting_drivers))
    }
}

/// One call of a relation function.
#[derive(Debug, Clone)]
pub(crate) struct StructuralNode {
    function: Function,
    input: LogicalPlan,
    roles: Roles,
    options: Vec<(&'static Argument, Given)>,
    /// Conditions on the result that were pushed and may not be: see [`conditions`].
    kept: Vec<Expr>,
    schema: DFSchemaRef,
    result: Arc<ResultSchema>,
}

impl StructuralNode {
    /// Builds the node and checks everything about the call that is known by now.
    ///
    /// # Errors
    /// Values an argument does not take, contradictions, names that would occur twice in the result.
    pub(crate) fn try_new(
        function: Function,
        input: LogicalPlan,
        roles: Roles,
        options: Vec<(&'static Argument, Given)>,
    ) -> Result<Self> {
        let (drivers, drifting_drivers) = roles.driver_names();
        let mut seen = BTreeSet::new();
        if let Some(twice) = drivers.iter().chain(&drifting_drivers).find(|name| !seen.insert(*name)) {
            let what = format!("names '{twice}' twice; a driver has one coefficient, constant or drifting");
            return Err(bad_argument(function, "drivers", what));
        }
        let time = input.schema().qualified_field_from_column(&roles.at)?.1.data_type().clone();
        let axis =
            TimeKind::try_new(&time).map_err(|error| bad_argument(function, "at", error.to_string()))?.axis();
        let values = Values { caller: function.into(), given: &options };
        values.settings(axis, &drivers, &drifting_drivers)?;
        let (states, disturbances) = match function {
            Function::StateSpace => values.form_size()?,
            _ => (0, 0),
        };
        let (scale, parts) = (values.scale()?, values.parts()?);
        let layout = Layout { time, drivers, drifting_drivers, scale, parts, states, disturbances };

        let keys = roles
            .keys
            .iter()
            .map(|key| input.schema().qualified_field_from_column(key))
            .collect::<Result<Vec<_>>>()?;
        let columns = layout.columns(function.columns());
        let mut fields = Vec::with_capacity(keys.len() + columns.len());
        for (qualifier, field) in &keys {
            let clash = |(other, _): &(FieldRef, _)| other.name() == field.name();
            if columns.iter().any(clash) {
                let what = format!(
                    "names '{0}', which is a column of the result; rename it inside data",
                    field.name()
                );
                return Err(bad_argument(function, "per", what));
            }
            fields.push((qualifier.cloned(), Arc::clone(field)));
        }
        let key_fields = keys.iter().map(|(_, field)| Arc::clone(field)).collect();
        fields.extend(columns.iter().map(|(field, _)| (None, Arc::clone(field))));
        let mut names = BTreeSet::new();
        if let Some((field, _)) = columns.iter().find(|(field, _)| !names.insert(field.name().as_str())) {
            let what =
                format!("two columns of the result would have the name '{}'; rename a driver", field.name());
            return Err(bad_call(function, what));
        }
        let schema = DFSchema::new_with_metadata(fields, Default::default()).map_err(|error| {
            bad_call(function, format!("two columns of the result would have one name: {error}"))
        })?;
        let result = Arc::new(ResultSchema::new(key_fields, columns));
        Ok(Self { function, input, roles, options, kept: Vec::new(), schema: Arc::new(schema), result })
    }

    pub(crate) fn function(&self) -> Function {
        self.function
    }

    pub(crate) fn roles(&self) -> &Roles {
        &self.roles
    }

    pub(crate) fn result(&self) -> &Arc<ResultSchema> {
        &self.result
    }

    /// Conditions that the rows of the result have to meet.
    pub(crate) fn kept(&self) -> &[Expr] {
        &self.kept
    }

    /// What the operator works with.
    ///
    /// # Errors
    /// Parameters that have no value, and mistakes in those that have got one.
    pub(crate) fn settings(&self) -> Result<Settings> {
        let values = Values { caller: self.function.into(), given: &self.options };
        if let Some((argument, _)) = self.options.iter().find(|(_, given)| given.value().is_none()) {
            let what = "is a parameter without a value; EXECUTE the prepared statement with one";
            return Err(bad_argument(self.function, argument.name, what));
        }
        let (drivers, drifting_drivers) = self.roles.driver_names();
        let (_, time) = self.input.schema().qualified_field_from_column(&self.roles.at)?;
        let kind = TimeKind::try_new(time.data_type())
            .map_err(|error| bad_argument(self.function, "at", error.to_string()))?;
        values.settings(kind.axis(), &drivers, &drifting_drivers)
    }

    /// The call in a line: `per=[region, product], at=week, observed=units, trend=damped, horizon=13`.
    pub(crate) fn describe(&self) -> String {
        let names = |columns: &mut dyn Iterator<Item = &String>| {
            format!("[{}]", columns.map(String::as_str).collect::<Vec<_>>().join(", "))
        };
        let mut parts = Vec::new();
        if !self.roles.keys.is_empty() {
            parts.push(format!("per={}", names(&mut self.roles.keys.iter().map(|key| &key.name))));
        }
        parts.push(format!("at={}", self.roles.at.name));
        parts.push(format!("observed={}", self.roles.observed.name));
        for (name, drivers) in
            [("drivers", &self.roles.drivers), ("drifting_drivers", &self.roles.drifting_drivers)]
        {
            if !drivers.is_empty() {
                parts.push(format!("{name}={}", names(&mut drivers.iter().map(|driver| &driver.name))));
            }
        }
        for (argument, given) in &self.options {
            let value = match given.value() {
                Some(value) => value.to_string().replace('\'', ""),
                None => in_words(given.exprs()),
            };
            parts.push(format!("{}={value}", argument.name));
        }
        parts.join(", ")
    }
}

impl UserDefinedLogicalNodeCore for StructuralNode {
    fn name(&self) -> &str {
        self.function.node_name()
    }

    fn inputs(&self) -> Vec<&LogicalPlan> {
        vec![&self.input]
    }

    fn schema(&self) -> &DFSchemaRef {
        &self.schema
    }

    fn expressions(&self) -> Vec<Expr> {
        let columns = self.roles.columns().cloned().map(Expr::Column);
        let options = self.options.iter().flat_map(|(_, given)| given.exprs().to_vec());
        columns.chain(options).chain(self.kept.iter().cloned()).collect()
    }

    fn prevent_predicate_push_down_columns(&self) -> HashSet<String> {
        let columns = self.schema.fields().iter().skip(self.roles.keys.len());
        columns.map(|field| field.name().clone()).collect()
    }

    fn fmt_for_explain(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}: {}", self.name(), self.describe())?;
        match self.kept.is_empty() {
            true => Ok(()),
            false => write!(f, ", where=[{}]", in_words(&self.kept)),
        }
    }

    fn with_exprs_and_inputs(&self, exprs: Vec<Expr>, mut inputs: Vec<LogicalPlan>) -> Result<Self> {
        let mut exprs = exprs.into_iter().map(Expr::unalias);
        let mut column = |old: &Column| match exprs.next() {
            Some(Expr::Column(column)) => Ok(column),
            other => Err(bad_call(
                self.function,
                format!("the optimizer replaced column '{old}' by {other:?}, which the node cannot take"),
            )),
        };
        let roles = Roles {
            keys: self.roles.keys.iter().map(&mut column).collect::<Result<_>>()?,
            at: column(&self.roles.at)?,
            observed: column(&self.roles.observed)?,
            drivers: with_columns(&self.roles.drivers, &mut column)?,
            drifting_drivers: with_columns(&self.roles.drifting_drivers, &mut column)?,
        };
        let mut options = Vec::with_capacity(self.options.len());
        for (argument, given) in &self.options {
            let given = given.with_exprs(&mut exprs).fold().map_err(|not_constant| {
                bad_argument(
                    self.function,
                    argument.name,
                    format!("must be a constant, not {}", not_constant.expr),
                )
            })?;
            options.push((*argument, given));
        }
        let kept = exprs.take(self.kept.len()).collect::<Vec<_>>();
        let input =
            inputs.pop().ok_or_else(|| bad_call(self.function, "the optimizer took the input away"))?;
        let (input, more) = conditions::separate(input, &self.input)?;
        let node = Self::try_new(self.function, input, roles, options)?;
        Ok(Self { kept: kept.into_iter().chain(more).collect(), ..node })
    }

    fn necessary_children_exprs(&self, output_columns: &[usize]) -> Option<Vec<Vec<usize>>> {
        // Keys pass through; whatever else is needed stands in `expressions`.
        let keys = output_columns.iter().filter_map(|&at| self.roles.keys.get(at));
        let indices = keys.map(|key| self.input.schema().index_of_column(key)).collect::<Result<Vec<_>>>();
        indices.ok().map(|indices| vec![indices])
    }
}

fn in_words(exprs: &[Expr]) -> String {
    exprs.iter().map(ToString::to_string).collect::<Vec<_>>().join(", ")
}

fn with_columns(
    drivers: &[Driver],
    column: &mut dyn FnMut(&Column) -> Result<Column>,
) -> Result<Vec<Driver>> {
    drivers.iter().map(|old| Ok(Driver { name: old.name.clone(), column: column(&old.column)? })).collect()
}

// The schema follows from the rest, hence these by hand.
impl PartialEq for StructuralNode {
    fn eq(&self, other: &Self) -> bool {
        (self.function, &self.roles, &self.options, &self.kept, &self.input)
            == (other.function, &other.roles, &other.options, &other.kept, &other.input)
    }
}

impl Eq for StructuralNode {}

impl Hash for StructuralNode {
    fn hash<H: Hasher>(&self, state: &mut H) {
        (self.function, &self.roles, &self.options, &self.kept, &self.input).hash(state);
    }
}

impl PartialOrd for StructuralNode {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        (self.function, &self.roles, &self.options, &self.kept, &self.input).partial_cmp(&(
            other.function,
            &other.roles,
            &other.options,
            &other.kept,
            &other.input,
        ))
    }
}
