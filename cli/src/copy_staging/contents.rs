//! What lies in a folder: is it only output of the kind that is to be written, and how much is it?

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use super::Files;
use crate::exit::{Failure, Outcome};

/// Compressions whose ending the engine appends to that of the format.
const COMPRESSIONS: [&str; 5] = ["gz", "bz2", "xz", "zst", "zstd"];

/// Refuses to replace a folder that holds anything but files of the format with ending `extension`, at any
/// depth below folders named `column=value`. A folder that is missing or empty may be replaced.
///
/// # Errors
/// With the first thing found that a COPY would not have written; nothing has been touched.
pub(super) fn check_replaceable(folder: &Path, shown: &str, extension: &str) -> Outcome<()> {
    let extension = extension.trim_start_matches('.');
    match first_foreign(folder, extension) {
        Ok(None) => Ok(()),
        Ok(Some(foreign)) => {
            let inside = foreign.strip_prefix(folder).unwrap_or(&foreign).display();
            Err(Failure::failed(format!(
                "will not replace the folder '{shown}': it holds '{inside}', which is not a {extension} file \
                 of a COPY. A COPY replaces its folder whole, so the folder must hold nothing else: write to \
                 another folder, or move '{inside}' away"
            )))
        }
        Err(error) => Err(Failure::failed(format!("cannot look into the folder '{shown}': {error}"))),
    }
}

fn first_foreign(folder: &Path, extension: &str) -> io::Result<Option<PathBuf>> {
    let entries = match fs::read_dir(folder) {
        Ok(entries) => entries,
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(None),
        Err(error) => return Err(error),
    };
    for entry in entries {
        let entry = entry?;
        let name = entry.file_name().to_string_lossy().into_owned();
        let kind = entry.file_type()?;
        let foreign = if kind.is_dir() {
            // A folder such as `region=North`; one without a value in its name is not made by a COPY.
            if name.contains('=') && !name.starts_with('.') {
                first_foreign(&entry.path(), extension)?
            } else {
                Some(entry.path())
            }
        } else {
            (!kind.is_file() || !has_format(&name, extension)).then(|| entry.path())
        };
        if foreign.is_some() {
            return Ok(foreign);
        }
    }
    Ok(None)
}

/// Whether a file name ends in `.extension`, a compression's ending after it or not.
fn has_format(name: &str, extension: &str) -> bool {
    let bare = COMPRESSIONS
        .iter()
        .find_map(|ending| name.strip_suffix(ending).and_then(|rest| rest.strip_suffix('.')))
        .unwrap_or(name);
    !name.starts_with('.')
        && [bare, name].iter().any(|name| {
            name.strip_suffix(extension)
                .and_then(|stem| stem.strip_suffix('.'))
                .is_some_and(|stem| !stem.is_empty())
        })
}

/// Number and bytes of `files`.
pub(super) fn measure(files: &[PathBuf]) -> io::Result<Files> {
    let mut total = Files::default();
    for file in files {
        total.number += 1;
        total.bytes += fs::metadata(file)?.len();
    }
    Ok(total)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn folder_with(names: &[&str]) -> tempfile::TempDir {
        let folder = tempfile::tempdir().expect("folder");
        for name in names {
            let path = folder.path().join(name);
            fs::create_dir_all(path.parent().expect("inside")).expect("made");
            fs::write(path, "x").expect("written");
        }
        folder
    }

    fn verdict(names: &[&str], extension: &str) -> Result<(), String> {
        check_replaceable(folder_with(names).path(), "out/", extension).map_err(|failure| failure.message)
    }

    #[test]
    fn own_output_may_be_replaced() {
        assert_eq!(verdict(&[], "parquet"), Ok(()));
        assert_eq!(verdict(&["part-0.parquet", "q.parquet"], "parquet"), Ok(()));
        assert_eq!(verdict(&["region=North/product=Butter/part-0.parquet"], ".parquet"), Ok(()));
        assert_eq!(verdict(&["a.csv", "b.csv.gz"], "csv"), Ok(()));
        assert_eq!(verdict(&["b.csv.gz"], "csv.gz"), Ok(()));
    }

    #[test]
    fn anything_else_is_named_and_kept() {
        for foreign in [
            "notes.txt",
            "region=North/notes.txt",
            "a.csv",
            ".hidden.parquet",
            "old/part-0.parquet",
            "parquet",
        ] {
            let told = verdict(&["part-0.parquet", foreign], "parquet").expect_err(foreign);
            let named = foreign.split('/').next().expect("a part");
            assert!(told.contains(named) && told.contains("another folder"), "{foreign}: {told}");
        }
    }

    #[cfg(unix)]
    #[test]
    fn links_are_foreign() {
        let folder = folder_with(&["part-0.parquet"]);
        std::os::unix::fs::symlink("/elsewhere", folder.path().join("more.parquet")).expect("linked");
        assert!(check_replaceable(folder.path(), "out/", "parquet").is_err());
    }

    #[test]
    fn bytes_are_summed() {
        let folder = folder_with(&["region=North/a.parquet", "region=South/b.parquet"]);
        let files = ["region=North/a.parquet", "region=South/b.parquet"].map(|name| folder.path().join(name));
        assert_eq!(measure(&files).expect("measured"), Files { number: 2, bytes: 2 });
    }
}
