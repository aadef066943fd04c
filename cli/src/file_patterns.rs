//! Patterns of file names (`*`, `?`, `[a-z]`, `**`) as paths the engine can list.
//!
//! The engine matches a pattern against file names in one folder and looks through folders named
//! `column=value`. A pattern that has a `/` of its own, such as `'2024-*/sales.parquet'` or
//! `'sales/region=*/*.parquet'`, is resolved here:
//!
//! - files in ordinary folders are handed to the engine one by one;
//! - where the pattern takes every file below `column=value` folders, the engine is given the folder above and
//!   reads the columns from the names;
//! - a pattern that picks some of those folders is refused: the column says it better (`WHERE region = …`).
//!
//! The same holds for patterns in the URL of an object store, whose names are listed instead of folders.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use datafusion::common::{DataFusionError, Result, plan_datafusion_err, plan_err};
use datafusion::datasource::listing::ListingTableUrl;
use datafusion::execution::session_state::SessionState;
use futures::TryStreamExt;
use glob::{MatchOptions, Pattern};
use url::Url;

use crate::stores;

/// `*` stays within a folder, only `**` crosses folders, and neither takes hidden files.
const MATCHING: MatchOptions =
    MatchOptions { case_sensitive: true, require_literal_separator: true, require_literal_leading_dot: true };

/// What to list for the table name `name`.
///
/// # Errors
/// For a pattern that is malformed, matches nothing, or picks among hive folders; for a URL that no store serves.
pub(crate) async fn resolve(name: &str, state: &SessionState) -> Result<Vec<ListingTableUrl>> {
    let url = match stores::listing_url(name)? {
        Some(remote) => remote,
        None => ListingTableUrl::parse(name)?,
    };
    let Some(pattern) = url.get_glob().as_ref().filter(|glob| glob.as_str().contains('/')).cloned() else {
        return Ok(vec![url]);
    };
    let below = match url.get_url().to_file_path() {
        Ok(base) => {
            files_below(&base).map_err(|error| plan_datafusion_err!("cannot look for '{name}': {error}"))?
        }
        Err(()) => objects_below(&url, state).await?,
    };
    chosen(name, url.get_url(), &pattern, below)
}

/// Sorts the names `below` a folder by a pattern that has a `/` of its own.
fn chosen(name: &str, base: &Url, pattern: &Pattern, below: Vec<String>) -> Result<Vec<ListingTableUrl>> {
    let (mut taken, left): (Vec<String>, Vec<String>) =
        below.into_iter().partition(|file| pattern.matches_with(file, MATCHING));
    let last = pattern.as_str().rsplit('/').next().unwrap_or("*");
    if taken.is_empty() {
        return Err(nothing_matches(name));
    }
    if taken.iter().all(|file| !in_hive_folder(file)) {
        taken.sort();
        return taken.iter().map(|file| ListingTableUrl::try_new(url_below(base, file)?, None)).collect();
    }
    let same_name = Pattern::new(last).map_err(|error| plan_datafusion_err!("pattern '{name}': {error}"))?;
    let all = taken.iter().all(|file| only_hive_folders(file))
        && !left
            .iter()
            .any(|file| only_hive_folders(file) && same_name.matches_with(file_name(file), MATCHING));
    if all {
        return Ok(vec![ListingTableUrl::try_new(url_below(base, "")?, None)?.with_glob(last)?]);
    }
    let column = taken.iter().find_map(|file| hive_column(file)).unwrap_or("column");
    plan_err!(
        "the pattern '{name}' picks some of the folders named '{column}=…'; read the folder above them and say it \
         with the column: FROM '{}/' WHERE {column} = …",
        shown_base(name)
    )
}

/// The error about a name that no file has.
pub(crate) fn nothing_matches(name: &str) -> DataFusionError {
    if name.contains("://") {
        return plan_datafusion_err!(
            "no file matches '{name}': check the path, its capital letters included"
        );
    }
    let looked_in = match std::env::current_dir() {
        Ok(here) if !Path::new(name).is_absolute() => format!(" in '{}'", here.display()),
        _ => String::new(),
    };
    plan_datafusion_err!(
        "no file matches '{name}'{looked_in}: check the path; it counts from the current directory"
    )
}

/// The URL of a file below a folder; of the folder itself, with its slash, for an empty name.
fn url_below(base: &Url, file: &str) -> Result<Url> {
    let mut url = base.clone();
    url.path_segments_mut()
        .map_err(|()| plan_datafusion_err!("'{base}' is no place for files"))?
        .pop_if_empty()
        .extend(file.split('/'));
    Ok(url)
}

/// The part of a pattern before its first special letter, without the last separator.
fn shown_base(name: &str) -> &str {
    let plain = name.find(['*', '?', '[']).map_or(name, |at| &name[..at]);
    plain.rsplit_once('/').map_or(".", |(base, _)| base)
}

fn file_name(file: &str) -> &str {
    file.rsplit('/').next().unwrap_or(file)
}

fn folders(file: &str) -> impl Iterator<Item = &str> {
    file.rsplit_once('/').map_or("", |(folders, _)| folders).split('/').filter(|folder| !folder.is_empty())
}

fn in_hive_folder(file: &str) -> bool {
    folders(file).any(|folder| folder.contains('='))
}

fn only_hive_folders(file: &str) -> bool {
    folders(file).all(|folder| folder.contains('='))
}

fn hive_column(file: &str) -> Option<&str> {
    folders(file).find_map(|folder| folder.split_once('=')).map(|(column, _)| column)
}

/// The files below `base`, as paths from there with `/` between their parts. Hidden folders are left out.
fn files_below(base: &Path) -> io::Result<Vec<String>> {
    let mut found = Vec::new();
    let mut open: Vec<(PathBuf, String)> = vec![(base.to_path_buf(), String::new())];
    while let Some((folder, shown)) = open.pop() {
        let entries = match fs::read_dir(&folder) {
            Err(error) if error.kind() == io::ErrorKind::NotFound => continue,
            entries => entries?,
        };
        for entry in entries {
            let entry = entry?;
            let name = entry.file_name().to_string_lossy().into_owned();
            let path = format!("{shown}{name}");
            if entry.path().is_dir() {
                if !name.starts_with('.') {
                    open.push((entry.path(), format!("{path}/")));
                }
            } else {
                found.push(path);
            }
        }
    }
    Ok(found)
}

/// The objects below the folder of `url`, as paths from there.
async fn objects_below(url: &ListingTableUrl, state: &SessionState) -> Result<Vec<String>> {
    let store = state.runtime_env().object_store(url)?;
    let base = url.prefix().as_ref();
    let listed: Vec<_> = store.list(Some(url.prefix())).try_collect().await?;
    let relative =
        |path: &str| path.strip_prefix(base).map(|below| below.trim_start_matches('/').to_string());
    Ok(listed
        .iter()
        .filter_map(|object| relative(object.location.as_ref()))
        .filter(|file| !folders(file).any(|folder| folder.starts_with('.')))
        .collect())
}

#[cfg(test)]
mod tests {
    use datafusion::prelude::SessionContext;

    use super::*;

    async fn resolved(files: &[&str], pattern: &str) -> Result<Vec<String>, String> {
        let folder = tempfile::tempdir().expect("folder");
        for file in files {
            let path = folder.path().join(file);
            fs::create_dir_all(path.parent().expect("inside")).expect("made");
            fs::write(path, "").expect("written");
        }
        let base = folder.path().display().to_string();
        let state = SessionContext::new().state();
        let urls = resolve(&format!("{base}/{pattern}"), &state).await.map_err(|error| error.to_string())?;
        let shown = |url: ListingTableUrl| {
            let glob = url.get_glob().as_ref().map_or("", Pattern::as_str);
            format!("{}{glob}", url.as_str().trim_start_matches(&format!("file://{base}/")))
        };
        Ok(urls.into_iter().map(shown).collect())
    }

    const WEEKS: [&str; 3] = ["2024-01/a.csv", "2024-02/a.csv", "2025-01/a.csv"];
    const REGIONS: [&str; 3] = ["region=North/a.csv", "region=South/a.csv", "region=South/b.txt"];

    #[tokio::test]
    async fn a_pattern_in_one_folder_is_left_to_the_engine() {
        assert_eq!(resolved(&["a.csv"], "*.csv").await, Ok(vec!["*.csv".to_string()]));
    }

    #[tokio::test]
    async fn ordinary_folders_are_matched_here() {
        let found = resolved(&WEEKS, "2024-*/a.csv").await.expect("found");
        assert_eq!(found, ["2024-01/a.csv", "2024-02/a.csv"]);
        assert_eq!(resolved(&WEEKS, "**/a.csv").await.expect("found").len(), 3);
    }

    #[tokio::test]
    async fn all_hive_folders_are_read_with_their_column() {
        assert_eq!(resolved(&REGIONS, "region=*/*.csv").await, Ok(vec!["*.csv".to_string()]));
        assert_eq!(resolved(&REGIONS, "**/*.csv").await, Ok(vec!["*.csv".to_string()]));
    }

    #[tokio::test]
    async fn picking_hive_folders_is_the_columns_business() {
        let told = resolved(&REGIONS, "region=S*/*.csv").await.expect_err("picks");
        assert!(told.contains("WHERE region = "), "{told}");
    }

    #[tokio::test]
    async fn nothing_found_is_said() {
        assert!(resolved(&WEEKS, "2023-*/a.csv").await.expect_err("none").contains("no file matches"));
        assert!(resolved(&[], "no/where/*/a.csv").await.expect_err("none").contains("no file matches"));
    }
}
