//! The engine's session for one run of the command.

use std::sync::Arc;

use datafusion::execution::SessionStateBuilder;
use datafusion::execution::cache::cache_manager::CacheManagerConfig;
use datafusion::execution::context::SessionContext;
use datafusion::execution::memory_pool::{FairSpillPool, MemoryPool, TrackConsumersPool};
use datafusion::execution::runtime_env::RuntimeEnvBuilder;
use datafusion::logical_expr::LogicalPlan;
use datafusion::prelude::SessionConfig;
use datafusion::sql::parser::Statement;
use stillwell::InPlace;

use crate::args::EngineArgs;
use crate::errors;
use crate::exit::{Failure, Outcome};
use crate::file_tables;
use crate::nearest::nearest;
use crate::stores::Stores;
use crate::threads;

/// How many consumers of memory an out-of-memory message names.
const CONSUMERS_NAMED: std::num::NonZeroUsize = std::num::NonZeroUsize::new(3).unwrap();

/// Rows of a row group that is written. The writer holds one for each open file, and a folder per value of PARTITIONED BY
/// makes many of them; the engine's own 1,048,576 would take gigabytes for some dozens of folders.
const ROW_GROUP: usize = 131_072;

/// A session with stillwell's functions, files as tables, and the limits and settings of the command line.
///
/// # Errors
/// For a setting that the engine does not know or whose value it refuses.
pub(crate) async fn open(options: &EngineArgs, config: SessionConfig) -> Outcome<SessionContext> {
    // One file per folder, or per value of PARTITIONED BY, keeps the rows in the order of the statement.
    let config = config
        .with_target_partitions(threads::number(options))
        .with_information_schema(true)
        .set_usize("datafusion.execution.minimum_parallel_output_files", 1)
        .set_usize("datafusion.execution.parquet.max_row_group_size", ROW_GROUP);
    // What works on one thread must not fit on a second one meanwhile.
    let config = match threads::number(options) {
        1 => config.with_extension(Arc::new(InPlace)),
        _ => config,
    };
    let mut runtime = RuntimeEnvBuilder::new()
        .with_object_store_registry(Arc::new(Stores::default()))
        // A job reads folders that it has just replaced: a remembered list of files would be the old one.
        .with_cache_manager(CacheManagerConfig::default().with_list_files_cache_limit(0));
    if let Some(limit) = options.memory_limit {
        let pool: Arc<dyn MemoryPool> =
            Arc::new(TrackConsumersPool::new(FairSpillPool::new(limit.0), CONSUMERS_NAMED));
        runtime = runtime.with_memory_pool(pool);
    }
    let runtime = runtime.build_arc().map_err(|error| Failure::usage(errors::text(&error)))?;
    let state = SessionStateBuilder::new()
        .with_config(config)
        .with_runtime_env(runtime)
        .with_default_features()
        .build();
    // First the catalogs, then the functions: they look tables up in the catalogs they find.
    let context = file_tables::enable(SessionContext::new_with_state(state));
    stillwell::register(&context).map_err(|error| errors::failure(&error))?;
    for (key, value) in &options.settings {
        set(&context, key, value).await?;
    }
    Ok(context)
}

async fn set(context: &SessionContext, key: &str, value: &str) -> Outcome<()> {
    let known: Vec<String> =
        context.state().config_options().entries().into_iter().map(|entry| entry.key).collect();
    let is_key = key.chars().all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '.');
    if !is_key || (!known.iter().any(|other| other == key) && !key.starts_with("datafusion.runtime.")) {
        let near = nearest(key, known.iter().map(String::as_str));
        return Err(Failure::usage(format!(
            "--set: the engine has no option '{key}'{}; stillwell query \"SHOW ALL\" --rows 0 lists them",
            near.map(|name| format!(" (did you mean '{name}'?)")).unwrap_or_default()
        )));
    }
    let statement = format!("SET {key} = '{}'", value.replace('\'', "''"));
    match context.sql(&statement).await {
        Ok(_) => Ok(()),
        Err(error) => Err(Failure::usage(format!("--set {key}={value}: {}", errors::text(&error)))),
    }
}

/// The plan of a statement.
///
/// # Errors
/// When it names what is not there, or asks for what cannot be.
pub(crate) async fn plan(context: &SessionContext, statement: Statement) -> Outcome<LogicalPlan> {
    let planned = context.state().statement_to_plan(statement).await;
    planned.map_err(|error| errors::failure(&error))
}
