//! The argument `data`: a query, a name, or another call.

use std::sync::Arc;

use datafusion::catalog::CatalogProviderList;
use datafusion::common::TableReference;
use datafusion::datasource::provider_as_source;
use datafusion::error::{DataFusionError, Result};
use datafusion::logical_expr::planner::RelationPlannerContext;
use datafusion::logical_expr::{LogicalPlan, LogicalPlanBuilder};
use datafusion::sql::sqlparser::ast::FunctionArguments;
use datafusion::sql::sqlparser::ast::{Expr, Ident, ObjectName, TableFactor, TableFunctionArgs};
use futures::FutureExt;

use crate::sql::arguments::call::{arguments, is_named, text_of};
use crate::sql::arguments::suggest::nearest;
use crate::sql::error::bad_argument;
use crate::sql::function::Function;

/// Plans `data`.
///
/// # Errors
/// Unknown tables, anything that is not a relation, and whatever the engine says about the query.
pub(super) fn plan(
    function: Function,
    data: Expr,
    catalogs: &Arc<dyn CatalogProviderList>,
    context: &mut dyn RelationPlannerContext,
) -> Result<LogicalPlan> {
    match data {
        Expr::Subquery(subquery) => {
            context.plan(TableFactor::Derived { lateral: false, subquery, alias: None, sample: None })
        }
        Expr::Nested(inner) => plan(function, *inner, catalogs, context),
        Expr::Identifier(name) => named(function, vec![name], catalogs, context),
        Expr::CompoundIdentifier(names) => named(function, names, catalogs, context),
        Expr::Function(call) if is_named(&call.name, "table") => {
            let shown = call.to_string();
            match arguments(call.args).map(<[Expr; 1]>::try_from) {
                Some(Ok([inner])) => plan(function, inner, catalogs, context),
                _ => Err(not_a_relation(function, &shown)),
            }
        }
        Expr::Function(call) => {
            let shown = call.to_string();
            match call.args {
                FunctionArguments::List(list) => {
                    let args = TableFunctionArgs { args: list.args, settings: None };
                    context.plan(table(call.name, Some(args)))
                }
                _ => Err(not_a_relation(function, &shown)),
            }
        }
        other => match text_of(&other) {
            Some(path) => {
                let what = format!("takes a query: data => (SELECT * FROM '{path}')");
                Err(bad_argument(function, "data", what))
            }
            None if other.to_string().trim_start_matches('(').starts_with("VALUES") => {
                let what = format!("takes a query: data => (SELECT * FROM {other})");
                Err(bad_argument(function, "data", what))
            }
            None => Err(not_a_relation(function, &other.to_string())),
        },
    }
}

fn not_a_relation(function: Function, what: &str) -> DataFusionError {
    bad_argument(
        function,
        "data",
        format!("takes a query in parentheses, data => (SELECT … FROM …), not {what}"),
    )
}

fn table(name: ObjectName, args: Option<TableFunctionArgs>) -> TableFactor {
    TableFactor::Table {
        name,
        alias: None,
        args,
        with_hints: Vec::new(),
        version: None,
        with_ordinality: false,
        partitions: Vec::new(),
        json_path: None,
        sample: None,
        index_hints: Vec::new(),
    }
}

/// A CTE, a table the query names elsewhere too, or else a table of a catalog that can answer at once.
fn named(
    function: Function,
    name: Vec<Ident>,
    catalogs: &Arc<dyn CatalogProviderList>,
    context: &mut dyn RelationPlannerContext,
) -> Result<LogicalPlan> {
    let name = ObjectName::from(name);
    if let Ok(plan) = context.plan(table(name.clone(), None)) {
        return Ok(plan);
    }
    let reference = context.object_name_to_table_reference(name)?;
    let defaults = &context.context_provider().options().catalog;
    let full = reference.clone().resolve(&defaults.default_catalog, &defaults.default_schema);
    let schema = catalogs.catalog(&full.catalog).and_then(|catalog| catalog.schema(&full.schema));
    let known = schema.as_ref().map(|schema| schema.table_names()).unwrap_or_default();
    match schema.map(|schema| schema.table(&full.table).now_or_never()) {
        Some(Some(Ok(Some(provider)))) => {
            LogicalPlanBuilder::scan(reference, provider_as_source(provider), None)?.build()
        }
        Some(Some(Err(error))) => Err(error),
        // The catalog has to wait for an answer, which planning cannot.
        Some(None) => {
            let what = format!(
                "names '{reference}', whose catalog cannot answer at once; write data => (SELECT * FROM {reference})"
            );
            Err(bad_argument(function, "data", what))
        }
        Some(Some(Ok(None))) | None => Err(unknown(function, &reference, &known)),
    }
}

/// There is no such table; `known` are those of the schema it would be in.
fn unknown(function: Function, name: &TableReference, known: &[String]) -> DataFusionError {
    let help = match nearest(name.table(), known.iter().map(String::as_str)) {
        Some(meant) => format!("did you mean '{meant}'?"),
        None => "write a query, data => (SELECT … FROM …), or register the table first".to_string(),
    };
    bad_argument(function, "data", format!("names '{name}', but there is no such table or CTE; {help}"))
}
