//! `FROM forecast(data => …, …)`: from the call in SQL to a node of the logical plan.
//!
//! The planner is asked about every relation of a query and takes those that are calls of our functions.
//! `data` is planned by the engine like any other relation; a bare name is, on failure, looked up in the
//! catalogs, because names in argument position are not resolved before planning. Columns that are not bare
//! columns of `data` are computed by a projection below the node, so that the node deals with columns only.

mod columns;
mod data;

use std::sync::Arc;

use datafusion::catalog::CatalogProviderList;
use datafusion::common::DFSchema;
use datafusion::error::{DataFusionError, Result};
use datafusion::logical_expr::planner::{
    PlannedRelation, RelationPlanner, RelationPlannerContext, RelationPlanning,
};
use datafusion::logical_expr::{Expr, Extension, LogicalPlan};
use datafusion::sql::sqlparser::ast::{
    Expr as SqlExpr, FunctionArg, Ident, ObjectName, ObjectNamePart, TableAlias, TableFactor,
};

use super::arguments::call::Call;
use super::arguments::constant::Given;
use super::arguments::suggest::valid_and_nearest;
use super::arguments::{Argument, Takes};
use super::error::bad_argument;
use super::function::Function;
use super::node::{Roles, StructuralNode};
use columns::ColumnReader;

/// Plans calls of the relation functions of this crate.
#[derive(Debug)]
pub struct StructuralRelationPlanner {
    catalogs: Arc<dyn CatalogProviderList>,
}

impl StructuralRelationPlanner {
    /// `catalogs`: where the bare name of a table is looked up.
    pub fn new(catalogs: Arc<dyn CatalogProviderList>) -> Self {
        Self { catalogs }
    }
}

impl RelationPlanner for StructuralRelationPlanner {
    fn plan_relation(
        &self,
        relation: TableFactor,
        context: &mut dyn RelationPlannerContext,
    ) -> Result<RelationPlanning> {
        let function = match &relation {
            TableFactor::Table { name, args: Some(_), .. } => function_of(name, context),
            _ => None,
        };
        match (function, relation) {
            (Some(function), TableFactor::Table { args: Some(args), alias, .. }) => {
                let call = Call::read(function, args.args, &|ident| context.normalize_ident(ident))?;
                let plan = self.plan_call(function, call, context)?;
                // Without an alias of its own the result would keep the qualifiers of `data`.
                let alias = alias.unwrap_or_else(|| alias_like(function));
                Ok(RelationPlanning::Planned(Box::new(PlannedRelation::new(plan, Some(alias)))))
            }
            (_, relation) => match slip_of(&relation, context) {
                Some(message) => Err(DataFusionError::Plan(message)),
                None => Ok(RelationPlanning::Original(Box::new(relation))),
            },
        }
    }
}

/// The complaint about a function that is not there, when the call can only mean one of ours: it has the named argument
/// `data`, which no table function of the engine can take.
fn slip_of(relation: &TableFactor, context: &dyn RelationPlannerContext) -> Option<String> {
    let TableFactor::Table { name, args: Some(args), .. } = relation else { return None };
    let [ObjectNamePart::Identifier(ident)] = name.0.as_slice() else { return None };
    let is_data = |name: &Ident| context.normalize_ident(name.clone()) == "data";
    let ours = args.args.iter().any(|argument| match argument {
        FunctionArg::Named { name, .. } | FunctionArg::ExprNamed { name: SqlExpr::Identifier(name), .. } => {
            is_data(name)
        }
        _ => false,
    });
    let given = context.normalize_ident(ident.clone());
    let valid = Function::ALL.map(Function::name);
    ours.then(|| format!("there is no function '{given}' for FROM; {}", valid_and_nearest(&given, &valid)))
}

impl StructuralRelationPlanner {
    fn plan_call(
        &self,
        function: Function,
        mut call: Call,
        context: &mut dyn RelationPlannerContext,
    ) -> Result<LogicalPlan> {
        let input = data::plan(function, call.take_required("data")?, &self.catalogs, context)?;
        if !input.all_out_ref_exprs().is_empty() {
            let what =
                "cannot depend on another relation of the same FROM; join inside the query of data instead";
            return Err(bad_argument(function, "data", what));
        }
        let mut reader = ColumnReader::new(function, input, context);
        let keys = reader.keys(call.take("per"))?;
        let at = reader.at(call.take_required("at")?)?;
        let observed = reader.observed(call.take_required("observed")?)?;
        let drivers = reader.drivers("drivers", call.take("drivers"))?;
        let drifting_drivers = reader.drivers("drifting_drivers", call.take("drifting_drivers"))?;
        let input = reader.input()?;
        let options = options(function, call, context)?;
        let roles = Roles { keys, at, observed, drivers, drifting_drivers };
        let node = StructuralNode::try_new(function, input, roles, options)?;
        Ok(LogicalPlan::Extension(Extension { node: Arc::new(node) }))
    }
}

/// The function that a name of one part means.
fn function_of(name: &ObjectName, context: &dyn RelationPlannerContext) -> Option<Function> {
    match name.0.as_slice() {
        [ObjectNamePart::Identifier(ident)] => Function::from_name(&context.normalize_ident(ident.clone())),
        _ => None,
    }
}

fn alias_like(function: Function) -> TableAlias {
    TableAlias { explicit: true, name: Ident::new(function.name()), columns: Vec::new(), at: None }
}

/// The arguments that are values, evaluated as far as they go.
fn options(
    function: Function,
    call: Call,
    context: &mut dyn RelationPlannerContext,
) -> Result<Vec<(&'static Argument, Given)>> {
    let no_columns = DFSchema::empty();
    let mut options = Vec::new();
    for (argument, shape) in call.values()? {
        let plan = |expr| {
            context.sql_to_expr(expr, &no_columns).map(|expr| super::parameters::typed(expr, argument))
        };
        let exprs = shape.exprs.into_iter().map(plan).collect::<Result<Vec<Expr>>>()?;
        let given = Given::new(exprs, shape.list).fold().map_err(|not_constant| {
            let what = format!("must be a constant or a parameter such as $1, not {}", not_constant.expr);
            bad_argument(function, argument.name, what)
        })?;
        if argument.takes == Takes::Constant && given.value().is_none() {
            let what =
                "decides which columns or units the result has, so it cannot be a parameter; write its value";
            return Err(bad_argument(function, argument.name, what));
        }
        options.push((argument, given));
    }
    Ok(options)
}
