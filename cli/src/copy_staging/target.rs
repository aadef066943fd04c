//! Where a COPY or `--to` writes: a local file or a local folder.
//!
//! What counts as a folder follows the engine: a trailing `/`, an existing folder, PARTITIONED BY, or a name
//! without an ending; the option `single_file_output` decides where it is given. Links are followed, so that
//! a link to a folder keeps pointing at it.

use std::env;
use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use datafusion::datasource::listing::ListingTableUrl;
use datafusion::datasource::physical_plan::FileOutputMode;
use datafusion::logical_expr::dml::CopyTo;
use url::Url;

use super::contents;
use crate::errors;
use crate::exit::{Failure, Outcome};

/// One file, or a folder of files.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Kind {
    File,
    Folder,
}

impl Kind {
    /// What a COPY writes.
    ///
    /// # Errors
    /// When its target is no place at all.
    pub(super) fn of_copy(copy: &CopyTo) -> Outcome<Self> {
        let mode = match copy.options.get("single_file_output").map(|value| value.trim()) {
            Some("true") => FileOutputMode::SingleFile,
            Some("false") => FileOutputMode::Directory,
            // Another value is refused by the engine in its own words.
            _ => FileOutputMode::Automatic,
        };
        let url = ListingTableUrl::parse(&copy.output_url).map_err(|e| errors::failure(&e))?;
        let one_file = copy.partition_by.is_empty() && mode.single_file_output(&url);
        Ok(if one_file { Self::File } else { Self::Folder })
    }
}

/// A local place that output is to appear at, checked to be replaceable.
#[derive(Debug, Clone)]
pub(crate) struct Target {
    /// As the user wrote it, for messages.
    pub(super) shown: String,
    /// Absolute, links followed.
    pub(super) path: PathBuf,
    pub(super) kind: Kind,
}

impl Target {
    /// The target of a COPY; `None` when it is not local.
    ///
    /// # Errors
    /// When it is no place to write to, or holds what a COPY must not replace.
    pub(super) fn of_copy(copy: &CopyTo) -> Outcome<Option<Self>> {
        let shown = copy.output_url.clone();
        let Some(path) = local_path(&shown)? else { return Ok(None) };
        let kind = Kind::of_copy(copy)?;
        let target = Self { path: follow_links(&path, &shown)?, shown, kind };
        target.check()?;
        if kind == Kind::Folder {
            contents::check_replaceable(&target.path, &target.shown, &copy.file_type.get_ext())?;
        }
        Ok(Some(target))
    }

    /// The file that `--to` names.
    ///
    /// # Errors
    /// When it is a folder or no place to write to.
    pub(crate) fn file(path: &Path) -> Outcome<Self> {
        let shown = path.display().to_string();
        if shown.contains("://") {
            return Err(Failure::usage(format!(
                "--to writes local files, and '{shown}' is a URL; write COPY (…) TO '{shown}' in a job: stillwell run"
            )));
        }
        if shown.ends_with(['/', std::path::MAIN_SEPARATOR]) {
            return Err(Failure::usage(format!("'{shown}' is a folder; --to needs the name of a file")));
        }
        let absolute = std::path::absolute(path).map_err(|e| cannot_use(&shown, &e))?;
        let target = Self { path: follow_links(&absolute, &shown)?, shown, kind: Kind::File };
        target.check()?;
        Ok(target)
    }

    /// The folder that receives the target.
    pub(super) fn parent(&self) -> Outcome<&Path> {
        self.path.parent().ok_or_else(|| self.refuse("it is the root of the file system"))
    }

    /// The last part of the path.
    pub(super) fn name(&self) -> Outcome<&str> {
        self.path
            .file_name()
            .and_then(|name| name.to_str())
            .ok_or_else(|| self.refuse("it has no name of its own, or one that is not UTF-8"))
    }

    fn check(&self) -> Outcome<()> {
        self.parent()?;
        self.name()?;
        let found = match fs::metadata(&self.path) {
            Ok(found) => found,
            Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(()),
            Err(error) => return Err(cannot_use(&self.shown, &error)),
        };
        match self.kind {
            Kind::File if found.is_dir() => Err(self.refuse("it is a folder, and one file is to be written")),
            Kind::File if !found.is_file() => Err(self.refuse("it is neither a file nor a folder")),
            Kind::Folder if !found.is_dir() => Err(self.refuse(
                "it is a file, and a folder of files is to be written; remove it, or give the target an \
                 ending such as '.parquet' to write one file",
            )),
            Kind::Folder if env::current_dir().is_ok_and(|here| here.starts_with(&self.path)) => {
                Err(self.refuse("it is the current folder, or holds it; name a folder for this output alone"))
            }
            _ => Ok(()),
        }
    }

    fn refuse(&self, reason: &str) -> Failure {
        Failure::failed(format!("cannot write to '{}': {reason}", self.shown))
    }
}

/// The path behind a COPY target, absolute but with links as they are; `None` for other schemes.
pub(super) fn local_path(shown: &str) -> Outcome<Option<PathBuf>> {
    let path = if Path::new(shown).is_absolute() {
        PathBuf::from(shown)
    } else {
        match Url::parse(shown) {
            Ok(url) if url.scheme() == "file" => url.to_file_path().map_err(|()| {
                Failure::failed(format!("cannot write to '{shown}': not a path of this machine"))
            })?,
            Ok(_) => {
                refuse_pattern(shown)?;
                return Ok(None);
            }
            Err(_) => std::path::absolute(shown).map_err(|error| cannot_use(shown, &error))?,
        }
    };
    refuse_pattern(shown)?;
    Ok(Some(path))
}

fn refuse_pattern(shown: &str) -> Outcome<()> {
    if shown.contains(['*', '?', '[']) {
        return Err(Failure::failed(format!(
            "cannot write to '{shown}': a COPY writes to one place, so its name must not contain *, ? or ["
        )));
    }
    Ok(())
}

fn follow_links(path: &Path, shown: &str) -> Outcome<PathBuf> {
    match fs::canonicalize(path) {
        Ok(real) => Ok(real),
        Err(error) if error.kind() == io::ErrorKind::NotFound => match fs::symlink_metadata(path) {
            Ok(_) => {
                Err(Failure::failed(format!("cannot write to '{shown}': it is a link to something missing")))
            }
            Err(_) => Ok(path.components().collect()),
        },
        Err(error) => Err(cannot_use(shown, &error)),
    }
}

fn cannot_use(shown: &str, error: &io::Error) -> Failure {
    Failure::failed(format!("cannot write to '{shown}': {error}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_local_targets_are_ours() {
        assert_eq!(local_path("s3://warehouse/out/").expect("parses"), None);
        let from_url = local_path("file:///sales/with%20space/").expect("parses");
        assert_eq!(from_url, Some(PathBuf::from("/sales/with space/")));
        let relative = local_path("out/forecast").expect("parses").expect("local");
        assert!(relative.is_absolute() && relative.ends_with("out/forecast"));
    }

    #[test]
    fn patterns_are_no_place_to_write_to() {
        for pattern in ["out/*.parquet", "s3://warehouse/*.parquet"] {
            assert!(local_path(pattern).expect_err("pattern").message.contains("one place"), "{pattern}");
        }
    }

    #[test]
    fn a_folder_is_no_file() {
        let folder = tempfile::tempdir().expect("folder");
        assert!(Target::file(folder.path()).expect_err("folder").message.contains("it is a folder"));
        assert!(Target::file(Path::new("s3://w/a.csv")).expect_err("URL").message.contains("COPY (…) TO"));
    }

    #[cfg(unix)]
    #[test]
    fn links_are_followed_and_dangling_ones_refused() {
        let folder = tempfile::tempdir().expect("folder");
        let real = folder.path().join("real.csv");
        fs::write(&real, "a\n1\n").expect("written");
        let link = folder.path().join("link.csv");
        std::os::unix::fs::symlink(&real, &link).expect("linked");
        assert_eq!(Target::file(&link).expect("usable").path, real.canonicalize().expect("there"));
        fs::remove_file(&real).expect("removed");
        assert!(Target::file(&link).expect_err("dangling").message.contains("missing"));
    }
}
