//! `FROM 'folder/'`, `FROM 'folder/*.parquet'`, `FROM 'file.csv'`: files as tables, without CREATE EXTERNAL TABLE.
//!
//! A table name that is not registered and looks like a path is read from the file system, relative to the
//! current directory, or from the store that its URL names (`stores`). Folders named `column=value` below it become columns. The engine has such a catalog of its
//! own; this one differs in what it says (which files it looked for, which endings it can read) and in patterns
//! that reach into folders (`file_patterns`).

use std::sync::Arc;

use async_trait::async_trait;
use datafusion::catalog::{DynamicFileCatalog, TableProvider, UrlTableFactory};
use datafusion::common::{Result, plan_datafusion_err, plan_err};
use datafusion::datasource::dynamic_file::DynamicListTableFactory;
use datafusion::datasource::listing::{ListingOptions, ListingTable, ListingTableConfig};
use datafusion::execution::SessionStateBuilder;
use datafusion::execution::context::SessionContext;
use datafusion::execution::session_state::SessionState;
use futures::TryStreamExt;

use crate::file_patterns;
use crate::stores;

/// Endings of file names and the engine's names of their formats.
const ENDINGS: [(&str, &str); 6] = [
    ("parquet", "parquet"),
    ("csv", "csv"),
    ("json", "json"),
    ("ndjson", "json"),
    ("jsonl", "json"),
    ("arrow", "arrow"),
];

/// Endings of compressed files and the engine's names of the compressions.
const COMPRESSIONS: [&str; 4] = ["gz", "bz2", "xz", "zst"];

/// `context` with files as tables.
pub(crate) fn enable(context: SessionContext) -> SessionContext {
    let files = Arc::new(FileTables::default());
    let catalogs = Arc::clone(context.state().catalog_list());
    let catalogs =
        Arc::new(DynamicFileCatalog::new(catalogs, Arc::clone(&files) as Arc<dyn UrlTableFactory>));
    let id = context.session_id();
    let builder: SessionStateBuilder = context.into_state_builder();
    let state = builder.with_session_id(id).with_catalog_list(catalogs).build();
    let context = SessionContext::new_with_state(state);
    files.engine.session_store().with_state(context.state_weak_ref());
    context
}

/// Makes a table of the files that a name stands for.
#[derive(Debug, Default)]
struct FileTables {
    /// The engine's own factory of such tables; it keeps the session for us.
    engine: DynamicListTableFactory,
}

#[async_trait]
impl UrlTableFactory for FileTables {
    async fn try_new(&self, name: &str) -> Result<Option<Arc<dyn TableProvider>>> {
        if !looks_like_files(name) {
            return Ok(None);
        }
        let state = self
            .engine
            .session_store()
            .get_session()
            .upgrade()
            .and_then(|session| session.read().as_any().downcast_ref::<SessionState>().cloned())
            .ok_or_else(|| plan_datafusion_err!("cannot read '{name}': the session has ended"))?;
        table(name, &state).await.map(Some)
    }
}

/// A plain word is the name of a table; a path has a separator, a pattern or a known ending.
fn looks_like_files(name: &str) -> bool {
    name.contains(['/', '\\', '*', '?', '[']) || ending(name).is_some()
}

async fn table(name: &str, state: &SessionState) -> Result<Arc<dyn TableProvider>> {
    let paths = file_patterns::resolve(name, state).await?;
    let mut found: Vec<String> = Vec::new();
    for path in &paths {
        let store = state.runtime_env().object_store(path)?;
        let listed = path.list_all_files(state, store.as_ref(), "").await?;
        let files: Vec<String> = listed.map_ok(|file| file.location.to_string()).try_collect().await?;
        found.extend(files.into_iter().filter(|file| !is_hidden(file)));
    }
    let ending = common_ending(name, &found)?;
    let (format, compression) = ending;
    let engine_name = ENDINGS.iter().find(|(known, _)| *known == format).map_or(format, |(_, name)| name);
    let options =
        compression.map(|c| ("format.compression".to_string(), c.to_string())).into_iter().collect();
    let format_of_engine = state
        .get_file_format_factory(engine_name)
        .ok_or_else(|| {
            plan_datafusion_err!("cannot read '{name}': no reader for {engine_name} in this build")
        })?
        .create(state, &options)?;
    let extension = match compression {
        Some(compression) => format!("{format}.{compression}"),
        None => format.to_string(),
    };
    let options = ListingOptions::new(format_of_engine).with_file_extension(extension);
    let config = ListingTableConfig::new_with_multi_paths(paths)
        .with_listing_options(options)
        .infer_partitions_from_path(state)
        .await?
        .infer_schema(state)
        .await
        .map_err(|error| match stores::told(&error) {
            // What a store says names the place already.
            Some(_) => error,
            None => error.context(format!("cannot read '{name}'")),
        })?;
    Ok(Arc::new(ListingTable::try_new(config)?))
}

/// Format and compression of a file name by its ending; `None` for endings that cannot be read.
fn ending(name: &str) -> Option<(&'static str, Option<&'static str>)> {
    let (rest, compression) = COMPRESSIONS
        .iter()
        .find_map(|c| Some((name.strip_suffix(c)?.strip_suffix('.')?, Some(*c))))
        .unwrap_or((name, None));
    let last = rest.rsplit_once('.')?.1.to_ascii_lowercase();
    ENDINGS.iter().find(|(known, _)| *known == last).map(|(known, _)| (*known, compression))
}

/// The one format that the files found have.
fn common_ending(name: &str, found: &[String]) -> Result<(&'static str, Option<&'static str>)> {
    let mut endings: Vec<_> = found.iter().filter_map(|file| ending(file)).collect();
    endings.sort_unstable();
    endings.dedup();
    match endings.as_slice() {
        [one] => Ok(*one),
        [] if found.is_empty() => Err(file_patterns::nothing_matches(name)),
        [] => plan_err!(
            "cannot read '{name}': '{}' has none of the endings .parquet, .csv, .json, .ndjson, .jsonl or .arrow \
             (with .gz, .bz2, .xz or .zst after it or not)",
            found[0].rsplit('/').next().unwrap_or_default()
        ),
        [(a, _), (b, _), ..] => plan_err!(
            "cannot read '{name}': it holds files of several formats ({a}, {b}); name those of one, as in \
             '{}/*.{a}'",
            name.trim_end_matches('/')
        ),
    }
}

/// Markers such as `_SUCCESS` and `.crc` files that other writers put beside their data.
fn is_hidden(location: &str) -> bool {
    location.rsplit('/').next().is_some_and(|file| file.starts_with(['.', '_']))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn words_are_tables_and_paths_are_files() {
        for name in ["sales", "sales.2024", "Sales Of Butter"] {
            assert!(!looks_like_files(name), "{name}");
        }
        for name in ["sales/", "sales/*.parquet", "sales.parquet", "weeks.CSV", "weeks.csv.gz", "s3://a/b"] {
            assert!(looks_like_files(name), "{name}");
        }
    }

    #[test]
    fn endings_tell_format_and_compression() {
        assert_eq!(ending("a/b.parquet"), Some(("parquet", None)));
        assert_eq!(ending("b.ndjson.zst"), Some(("ndjson", Some("zst"))));
        assert_eq!(ending("notes.txt"), None);
        assert_eq!(ending("gz"), None);
    }

    #[test]
    fn mixed_and_unreadable_folders_are_explained() {
        let told = |files: &[&str]| {
            let files: Vec<String> = files.iter().map(|f| (*f).to_string()).collect();
            common_ending("in/", &files).expect_err("unreadable").to_string()
        };
        assert!(told(&["a.csv", "b.parquet"]).contains("'in/*.csv'"));
        assert!(told(&["notes.txt"]).contains("'notes.txt' has none of the endings"));
        assert!(told(&[]).contains("no file matches 'in/'"));
    }
}
