//! Putting the functions into a session.

use std::any::Any;
use std::sync::Arc;

use datafusion::catalog::{CatalogProviderList, MemoryCatalogProviderList};
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::SessionStateBuilder;
use datafusion::execution::context::QueryPlanner;
use datafusion::prelude::SessionContext;

use super::planner::StructuralQueryPlanner;
use super::progress::Progress;
use super::registry;
use super::relation::StructuralRelationPlanner;
use super::watch::Watch;

/// The engine's planner, by the only thing it shows of itself.
const PLAIN_PLANNER: &str = "DefaultQueryPlanner";

/// Makes all functions of this crate available in a session: those for FROM and those for expressions. Calling
/// it twice does no harm.
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
        Planner::Ours => {
            registry::register_functions(context);
            return Ok(());
        }
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

/// Registers only the SQL side, for sessions with a query planner of their own: the calls in FROM, and the
/// scalar, aggregate and window functions, which need no planner.
///
/// # Errors
/// Whatever the session says.
pub fn register_relations(context: &SessionContext) -> Result<()> {
    registry::register_functions(context);
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
    let progress = builder.config().as_ref().and_then(|config| config.get_extension::<Progress>());
    let watch = Watch::new(progress);
    registry::add_to(builder.scalar_functions(), registry::scalars(&watch));
    registry::add_to(builder.aggregate_functions(), registry::aggregates(&watch));
    registry::add_to(builder.window_functions(), registry::windows(&watch));
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
