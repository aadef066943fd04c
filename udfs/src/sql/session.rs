//! Putting the functions into a session.

use std::any::Any;
use std::sync::Arc;

use datafusion::catalog::{CatalogProviderList, MemoryCatalogProviderList};
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::SessionStateBuilder;
use datafusion::execution::context::QueryPlanner;
use datafusion::prelude::SessionContext;

use super::calendar;
use super::planner::StructuralQueryPlanner;
use super::relation::StructuralRelationPlanner;

/// The engine's planner, by the only thing it shows of itself.
const PLAIN_PLANNER: &str = "DefaultQueryPlanner";

/// Makes `components`, `forecast`, `diagnostics` and the functions of the calendar available in a session. Calling it twice does no harm.
///
/// Register catalogs and URL tables first: bare table names in `data => …` are looked up in the catalogs
/// that the session has now.
///
/// # Errors
/// A session whose query planner is not the engine's own: it would have to be replaced. Add
/// [`StructuralExtensionPlanner`](super::StructuralExtensionPlanner) to that planner and call
/// [`register_relations`].
pub fn register(context: &SessionContext) -> Result<()> {
    let state = context.state();
    match kind_of(state.query_planner().as_ref()) {
        Planner::Ours => return Ok(()),
        Planner::Plain => {}
        Planner::Foreign(name) => {
            return Err(DataFusionError::Configuration(format!(
                "this session plans queries with {name}, which registering would replace; add \
                 stillwell::StructuralExtensionPlanner to it and call stillwell::register_relations"
            )));
        }
    }
    let state =
        SessionStateBuilder::new_from_existing(state).with_query_planner(Arc::new(StructuralQueryPlanner));
    *context.state_ref().write() = state.build();
    register_relations(context)
}

/// Registers only the SQL side, for sessions with a query planner of their own.
///
/// # Errors
/// Whatever the session says.
pub fn register_relations(context: &SessionContext) -> Result<()> {
    for function in calendar::functions() {
        context.register_udf(function);
    }
    let catalogs = Arc::clone(context.state().catalog_list());
    context.register_relation_planner(Arc::new(StructuralRelationPlanner::new(catalogs)))
}

/// The same for a session that is still being built.
///
/// The builder's query planner is replaced; a host with its own adds
/// [`StructuralExtensionPlanner`](super::StructuralExtensionPlanner) to that and sets it afterwards.
pub fn extend(mut builder: SessionStateBuilder) -> SessionStateBuilder {
    let catalogs = builder
        .catalog_list()
        .get_or_insert_with(|| Arc::new(MemoryCatalogProviderList::new()) as Arc<dyn CatalogProviderList>);
    let planner = Arc::new(StructuralRelationPlanner::new(Arc::clone(catalogs)));
    builder.relation_planners().get_or_insert_default().insert(0, planner);
    builder
        .scalar_functions()
        .get_or_insert_default()
        .extend(calendar::functions().into_iter().map(Arc::new));
    builder.with_query_planner(Arc::new(StructuralQueryPlanner))
}

/// Who plans the queries of a session.
enum Planner {
    Plain,
    Ours,
    Foreign(String),
}

fn kind_of(planner: &(dyn QueryPlanner + Send + Sync)) -> Planner {
    let any: &dyn Any = planner;
    let shown = format!("{planner:?}");
    match any.is::<StructuralQueryPlanner>() {
        true => Planner::Ours,
        false if shown.starts_with(PLAIN_PLANNER) => Planner::Plain,
        false => Planner::Foreign(shown.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect()),
    }
}
