//! Which folder the samples may go to, and what of an earlier run they replace.
//!
//! A run leaves a list of its Parquet files, [`MANIFEST`], in the folder, and writes it before the first of
//! them, so that an interrupted run can simply be repeated. A later run deletes exactly the files on that
//! list. It refuses a folder that holds something but no list, and one whose `sales/` or `truth/` holds a file
//! that is not on it, because a query over the folder would read that file too.

use std::collections::BTreeSet;
use std::fs;
use std::io;
use std::path::{Component, Path, PathBuf};

use super::error::SampleError;

/// Name of the list in the folder.
pub(super) const MANIFEST: &str = "samples.txt";
/// First line of the list: by it a later run knows its own.
const HEADING: &str = "Written by `stillwell samples`. A later run replaces the Parquet files listed here.";
/// Folders below which every file is the demo's.
const DATA_FOLDERS: [&str; 2] = ["sales", "truth"];

/// Adds what was being done, and where, to an error of the operating system.
pub(super) fn at(doing: &'static str, path: &Path) -> impl FnOnce(io::Error) -> SampleError {
    let path = path.to_path_buf();
    move |source| SampleError::Io { doing, path, source }
}

/// Makes the folder ready: creates it, or clears it of an earlier run's files, and leaves the new list.
///
/// `settings` goes into the list for a reader; `files` are the paths, below `dir`, about to be written.
///
/// # Errors
/// [`SampleError::NotAFolder`], [`SampleError::NotOurs`], [`SampleError::Foreign`], in which case nothing was
/// touched, or [`SampleError::Io`].
pub(super) fn prepare(dir: &Path, settings: &str, files: &[PathBuf]) -> Result<(), SampleError> {
    if dir.exists() && !dir.is_dir() {
        return Err(SampleError::NotAFolder(dir.to_path_buf()));
    }
    fs::create_dir_all(dir).map_err(at("create", dir))?;
    let manifest = dir.join(MANIFEST);
    match fs::read_to_string(&manifest) {
        Ok(text) if text.starts_with(HEADING) => clear(dir, &listed(&text))?,
        Ok(_) => return Err(SampleError::NotOurs(dir.to_path_buf())),
        Err(error) if error.kind() == io::ErrorKind::NotFound => {
            if fs::read_dir(dir).map_err(at("read", dir))?.next().is_some() {
                return Err(SampleError::NotOurs(dir.to_path_buf()));
            }
        }
        Err(error) => return Err(at("read", &manifest)(error)),
    }
    let mut text = format!("{HEADING}\n\n{settings}\n\n");
    for file in files {
        text.push_str(&slashed(file));
        text.push('\n');
    }
    fs::write(&manifest, text).map_err(at("write", &manifest))
}

/// A relative path with forward slashes, the same on every system.
fn slashed(path: &Path) -> String {
    let parts: Vec<_> = path.components().map(|part| part.as_os_str().to_string_lossy()).collect();
    parts.join("/")
}

/// The files on a list. A line counts only where it names a Parquet file below one of the data folders, so
/// that a list somebody edited cannot lead outside.
fn listed(text: &str) -> BTreeSet<PathBuf> {
    text.lines()
        .map(PathBuf::from)
        .filter(|path| {
            path.components().all(|part| matches!(part, Component::Normal(_)))
                && DATA_FOLDERS.iter().any(|folder| path.starts_with(folder))
                && path.extension().is_some_and(|extension| extension == "parquet")
        })
        .collect()
}

/// Deletes the listed files, once it is sure that the data folders hold nothing else.
fn clear(dir: &Path, listed: &BTreeSet<PathBuf>) -> Result<(), SampleError> {
    let mut folders = Vec::new();
    for folder in DATA_FOLDERS {
        let path = dir.join(folder);
        if path.is_dir() {
            visit(dir, &path, listed, &mut folders)?;
        }
    }
    for file in listed {
        let path = dir.join(file);
        match fs::remove_file(&path) {
            Err(error) if error.kind() != io::ErrorKind::NotFound => return Err(at("delete", &path)(error)),
            _ => {}
        }
    }
    for folder in folders {
        // An unfinished file of an interrupted run may keep a folder from being empty: it is then used again.
        fs::remove_dir(&folder).ok();
    }
    Ok(())
}

/// Collects the folders below and including `folder`, the inner ones first; fails at a file not on the list.
fn visit(
    dir: &Path,
    folder: &Path,
    listed: &BTreeSet<PathBuf>,
    folders: &mut Vec<PathBuf>,
) -> Result<(), SampleError> {
    for entry in fs::read_dir(folder).map_err(at("read", folder))? {
        let path = entry.map_err(at("read", folder))?.path();
        let is_part = path.extension().is_some_and(|extension| extension == super::writer::PART);
        if path.is_dir() && !path.is_symlink() {
            visit(dir, &path, listed, folders)?;
        } else if !is_part && !path.strip_prefix(dir).is_ok_and(|relative| listed.contains(relative)) {
            return Err(SampleError::Foreign(path));
        }
    }
    folders.push(folder.to_path_buf());
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_list_cannot_name_files_outside_the_data_folders() {
        let text = format!(
            "{HEADING}\nsales/region=A/part-0.parquet\ntruth/states.parquet\n../x.parquet\n/etc/x.parquet\n\
             sales/../../x.parquet\nother/x.parquet\nsales/notes.txt\n"
        );
        let files: Vec<_> = listed(&text).into_iter().collect();
        assert_eq!(
            files,
            [PathBuf::from("sales/region=A/part-0.parquet"), PathBuf::from("truth/states.parquet")]
        );
    }

    #[test]
    fn a_folder_with_something_else_in_it_is_refused_and_left_alone() {
        let place = tempfile::tempdir().expect("a temporary folder");
        fs::write(place.path().join("ledger.csv"), "a,b\n").expect("a file in it");
        let error = prepare(place.path(), "", &[]).expect_err("refused");
        assert!(matches!(error, SampleError::NotOurs(_)), "{error}");
        assert!(error.to_string().contains("name a new or an empty folder"), "{error}");
        assert_eq!(fs::read_dir(place.path()).expect("still readable").count(), 1);

        fs::write(place.path().join(MANIFEST), "my own notes\n").expect("a file of the same name");
        assert!(matches!(prepare(place.path(), "", &[]), Err(SampleError::NotOurs(_))));
    }

    #[test]
    fn a_file_in_the_way_is_refused() {
        let place = tempfile::tempdir().expect("a temporary folder");
        let file = place.path().join("samples");
        fs::write(&file, "").expect("a file");
        assert!(matches!(prepare(&file, "", &[]), Err(SampleError::NotAFolder(_))));
    }

    #[test]
    fn a_second_run_deletes_its_own_files_and_stops_at_a_foreign_one() {
        let place = tempfile::tempdir().expect("a temporary folder");
        let dir = place.path();
        let own = PathBuf::from("sales/region=A/part-0.parquet");
        prepare(dir, "first", std::slice::from_ref(&own)).expect("an empty folder is fine");
        fs::create_dir_all(dir.join("sales/region=A")).expect("its folder");
        fs::write(dir.join(&own), "old").expect("its file");
        fs::write(dir.join("my_job.sql"), "SELECT 1;").expect("a user's own job beside it");

        let foreign = dir.join("sales/region=B.parquet");
        fs::write(&foreign, "mine").expect("a foreign file");
        let error = prepare(dir, "second", &[]).expect_err("stops");
        assert!(matches!(&error, SampleError::Foreign(path) if *path == foreign), "{error}");
        assert!(dir.join(&own).exists(), "nothing was touched");

        fs::remove_file(&foreign).expect("moved away");
        prepare(dir, "third", &[]).expect("its own folder");
        assert!(!dir.join("sales").exists(), "old files and their empty folders are gone");
        assert!(dir.join("my_job.sql").exists());
        assert!(fs::read_to_string(dir.join(MANIFEST)).expect("the list").contains("third"));
    }
}
