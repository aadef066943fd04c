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

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use datafusion::common::{Result, plan_datafusion_err, plan_err};
use datafusion::datasource::listing::ListingTableUrl;
use glob::{MatchOptions, Pattern};

/// `*` stays within a folder, only `**` crosses folders, and neither takes hidden files.
const MATCHING: MatchOptions =
    MatchOptions { case_sensitive: true, require_literal_separator: true, require_literal_leading_dot: true };

/// What to list for the table name `name`.
///
/// # Errors
/// For a pattern that is malformed, matches nothing, or picks among hive folders.
pub(crate) fn resolve(name: &str) -> Result<Vec<ListingTableUrl>> {
    let url = ListingTableUrl::parse(name)?;
    let Some(pattern) = url.get_glob().as_ref().filter(|glob| glob.as_str().contains('/')).cloned() else {
        return Ok(vec![url]);
    };
    let base = url.get_url().to_file_path().map_err(|()| {
        plan_datafusion_err!("'{name}' is a pattern outside the local file system; name a folder")
    })?;
    let below =
        files_below(&base).map_err(|error| plan_datafusion_err!("cannot look for '{name}': {error}"))?;
    let (taken, left): (Vec<String>, Vec<String>) =
        below.into_iter().partition(|file| pattern.matches_with(file, MATCHING));
    let last = pattern.as_str().rsplit('/').next().unwrap_or("*");
    if taken.is_empty() {
        return plan_err!("no file matches '{name}': check the path; it counts from the current directory");
    }
    if taken.iter().all(|file| !in_hive_folder(file)) {
        let mut taken = taken;
        taken.sort();
        return taken.iter().map(|file| file_url(&base.join(file))).collect();
    }
    let same_name = Pattern::new(last).map_err(|error| plan_datafusion_err!("pattern '{name}': {error}"))?;
    let all = taken.iter().all(|file| only_hive_folders(file))
        && !left
            .iter()
            .any(|file| only_hive_folders(file) && same_name.matches_with(file_name(file), MATCHING));
    if all {
        return Ok(vec![folder_url(&base)?.with_glob(last)?]);
    }
    let column = taken.iter().find_map(|file| hive_column(file)).unwrap_or("column");
    plan_err!(
        "the pattern '{name}' picks some of the folders named '{column}=…'; read the folder above them and say it \
         with the column: FROM '{}/' WHERE {column} = …",
        shown_base(name)
    )
}

fn file_url(path: &Path) -> Result<ListingTableUrl> {
    let url = url::Url::from_file_path(path)
        .map_err(|()| plan_datafusion_err!("'{}' is not an absolute path", path.display()))?;
    ListingTableUrl::try_new(url, None)
}

fn folder_url(path: &Path) -> Result<ListingTableUrl> {
    let url = url::Url::from_directory_path(path)
        .map_err(|()| plan_datafusion_err!("'{}' is not an absolute path", path.display()))?;
    ListingTableUrl::try_new(url, None)
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

#[cfg(test)]
mod tests {
    use super::*;

    fn resolved(files: &[&str], pattern: &str) -> Result<Vec<String>, String> {
        let folder = tempfile::tempdir().expect("folder");
        for file in files {
            let path = folder.path().join(file);
            fs::create_dir_all(path.parent().expect("inside")).expect("made");
            fs::write(path, "").expect("written");
        }
        let base = folder.path().display().to_string();
        let urls = resolve(&format!("{base}/{pattern}")).map_err(|error| error.to_string())?;
        let shown = |url: ListingTableUrl| {
            let glob = url.get_glob().as_ref().map_or("", Pattern::as_str);
            format!("{}{glob}", url.as_str().trim_start_matches(&format!("file://{base}/")))
        };
        Ok(urls.into_iter().map(shown).collect())
    }

    const WEEKS: [&str; 3] = ["2024-01/a.csv", "2024-02/a.csv", "2025-01/a.csv"];
    const REGIONS: [&str; 3] = ["region=North/a.csv", "region=South/a.csv", "region=South/b.txt"];

    #[test]
    fn a_pattern_in_one_folder_is_left_to_the_engine() {
        assert_eq!(resolved(&["a.csv"], "*.csv"), Ok(vec!["*.csv".to_string()]));
    }

    #[test]
    fn ordinary_folders_are_matched_here() {
        let found = resolved(&WEEKS, "2024-*/a.csv").expect("found");
        assert_eq!(found, ["2024-01/a.csv", "2024-02/a.csv"]);
        assert_eq!(resolved(&WEEKS, "**/a.csv").expect("found").len(), 3);
    }

    #[test]
    fn all_hive_folders_are_read_with_their_column() {
        assert_eq!(resolved(&REGIONS, "region=*/*.csv"), Ok(vec!["*.csv".to_string()]));
        assert_eq!(resolved(&REGIONS, "**/*.csv"), Ok(vec!["*.csv".to_string()]));
    }

    #[test]
    fn picking_hive_folders_is_the_columns_business() {
        let told = resolved(&REGIONS, "region=S*/*.csv").expect_err("picks");
        assert!(told.contains("WHERE region = "), "{told}");
    }

    #[test]
    fn nothing_found_is_said() {
        assert!(resolved(&WEEKS, "2023-*/a.csv").expect_err("none").contains("no file matches"));
        assert!(resolved(&[], "no/where/*/a.csv").expect_err("none").contains("no file matches"));
    }
}
