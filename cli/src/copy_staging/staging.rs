//! The hidden folder beside a target in which its new content grows.
//!
//! A file `lock` in it is held (an advisory lock of the operating system) as long as the process lives; the
//! system releases it however the process ends. A staging folder whose lock can be taken is thus a leftover,
//! and one that is in use by another process is never touched.
//!
//! All staging folders of the process are listed, so that Ctrl-C and a panic can remove them from any thread.
//! The list is locked during a swap: removal waits until the swap is over.

use std::fs::{self, File};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::{Mutex, MutexGuard, PoisonError, TryLockError};
use std::thread;
use std::time::Duration;

use arrow::datatypes::SchemaRef;
use url::Url;

use super::disk::{self, Tree};
use super::target::{Kind, Target};
use super::{Files, contents, part_names, swap};
use crate::exit::{Failure, Outcome};
use crate::streams;

/// The staging folders that exist now.
static UNFINISHED: Mutex<Vec<Hidden>> = Mutex::new(Vec::new());

/// A staging folder, and the folders that were made to hold the target.
#[derive(Debug, Clone)]
struct Hidden {
    folder: PathBuf,
    made: Vec<PathBuf>,
}

/// The staging folder of one target; dropped, it is removed with all that is in it.
#[derive(Debug)]
pub(crate) struct Staging {
    target: Target,
    hidden: Hidden,
    /// Where the new content grows.
    content: PathBuf,
    /// Released when the process ends or the staging folder is dropped.
    _lock: File,
}

impl Staging {
    /// Makes the staging folder of `target`, and the folders above the target if they are missing.
    ///
    /// # Errors
    /// When the file system refuses.
    pub(crate) fn open(target: Target) -> Outcome<Self> {
        let parent = target.parent()?.to_path_buf();
        let name = target.name()?.to_string();
        clear_leftovers_of(&target.path, &target.shown);
        let refused = |error: io::Error| {
            Failure::failed(format!(
                "cannot write to '{}': {error} (in the folder '{}')",
                target.shown,
                parent.display()
            ))
        };
        let made = make_folders(&parent).map_err(refused)?;
        let folder = match tempfile::Builder::new().prefix(&prefix(&name)).tempdir_in(&parent) {
            Ok(folder) => folder.keep(),
            Err(error) => {
                remove_made(&made);
                return Err(refused(error));
            }
        };
        let hidden = Hidden { folder, made };
        unfinished().push(hidden.clone());
        let content = match target.kind {
            Kind::File => hidden.folder.join(&name),
            Kind::Folder => hidden.folder.join("new"),
        };
        let prepared = take_lock(&hidden.folder).and_then(|lock| {
            if target.kind == Kind::Folder {
                fs::create_dir(&content)?;
            }
            Ok(lock)
        });
        match prepared {
            Ok(lock) => Ok(Self { target, hidden, content, _lock: lock }),
            Err(error) => {
                forget(&hidden);
                remove(&hidden);
                Err(refused(error))
            }
        }
    }

    /// One file or a folder.
    pub(crate) fn kind(&self) -> Kind {
        self.target.kind
    }

    /// True when files stand in the target's place.
    pub(super) fn replaces_files(&self) -> bool {
        Tree::at(&self.target.path).is_ok_and(|tree| !tree.files.is_empty())
    }

    /// Where the new content grows.
    pub(crate) fn content(&self) -> &Path {
        &self.content
    }

    /// The same as the engine wants it: a URL, which unlike a path may hold any letter.
    pub(super) fn url(&self) -> Outcome<String> {
        let url = match self.target.kind {
            Kind::File => Url::from_file_path(&self.content),
            Kind::Folder => Url::from_directory_path(&self.content),
        };
        url.map(String::from)
            .map_err(|()| Failure::failed(format!("cannot write to '{}'", self.target.shown)))
    }

    /// Puts the content in the target's place. `schema`: what an empty Parquet folder is to carry.
    ///
    /// # Errors
    /// When the file system refuses; the target holds what it held before.
    pub(crate) fn put_in_place(mut self, schema: Option<&SchemaRef>) -> Outcome<Files> {
        self.swap_in(schema).map_err(|error| {
            Failure::failed(format!(
                "cannot put the new content of '{}' in place: {error}",
                self.target.shown
            ))
        })
    }

    fn swap_in(&mut self, schema: Option<&SchemaRef>) -> io::Result<Files> {
        if self.target.kind == Kind::Folder {
            part_names::settle(&self.content)?;
            if let Some(schema) = schema
                && Tree::at(&self.content)?.files.is_empty()
            {
                let file = self.content.join("part-0.parquet");
                fs::write(file, super::without_rows(schema).map_err(io::Error::other)?)?;
            }
        }
        let tree = Tree::at(&self.content)?;
        tree.flush()?;
        let files = contents::measure(&tree.files)?;
        let old = self.hidden.folder.join("old");
        {
            // Nobody removes meanwhile; and what somebody has begun to remove must not take anybody's place.
            let listed = unfinished();
            if !listed.iter().any(|hidden| hidden.folder == self.hidden.folder) {
                return Err(io::ErrorKind::Interrupted.into());
            }
            swap::replace(&self.content, &self.target.path, &old)?;
        }
        // What was made for the target holds it now.
        self.hidden.made.clear();
        if let Some(folder) = self.target.path.parent() {
            disk::flush_folder(folder);
        }
        Ok(files)
    }
}

impl Drop for Staging {
    fn drop(&mut self) {
        forget(&self.hidden);
        remove(&self.hidden);
    }
}

/// Clears what killed processes left beside the targets at `paths` (pairs of path and name in messages).
pub(crate) fn clear_leftovers<'a>(targets: impl IntoIterator<Item = &'a str>) {
    for shown in targets {
        if let Ok(Some(path)) = super::target::local_path(shown) {
            let path = fs::canonicalize(&path).unwrap_or_else(|_| path.components().collect());
            clear_leftovers_of(&path, shown);
        }
    }
}

fn clear_leftovers_of(target: &Path, shown: &str) {
    let (Some(parent), Some(name)) = (target.parent(), target.file_name().and_then(|n| n.to_str())) else {
        return;
    };
    let Ok(entries) = fs::read_dir(parent) else { return };
    for entry in entries.flatten() {
        let ours = entry.file_name().to_str().is_some_and(|found| found.starts_with(&prefix(name)));
        if !ours {
            continue;
        }
        let folder = entry.path();
        // No lock file: another process is just making this folder.
        let Ok(lock) = File::open(folder.join("lock")) else { continue };
        if lock.try_lock().is_err() {
            continue;
        }
        match swap::undo_half(target, &folder.join("old")) {
            Ok(false) => {}
            Ok(true) => {
                streams::tell(format_args!(
                    "'{shown}' was half replaced when an earlier run was killed; it has its old content again"
                ));
            }
            Err(error) => {
                streams::tell(format_args!(
                    "'{}' holds the old content of '{shown}', which cannot be put back: {error}",
                    folder.display()
                ));
                continue;
            }
        }
        remove_folder(&folder);
    }
}

/// Removes every staging folder of this process: for the end by a signal or a panic, from any thread. Waits for
/// a swap that is under way, but not for long: the swap may be what panicked.
pub(crate) fn remove_all_unfinished() {
    for _ in 0..20 {
        let mut list = match UNFINISHED.try_lock() {
            Ok(list) => list,
            Err(TryLockError::Poisoned(list)) => list.into_inner(),
            Err(TryLockError::WouldBlock) => {
                thread::sleep(Duration::from_millis(10));
                continue;
            }
        };
        for hidden in list.drain(..) {
            remove(&hidden);
        }
        return;
    }
}

fn unfinished() -> MutexGuard<'static, Vec<Hidden>> {
    UNFINISHED.lock().unwrap_or_else(PoisonError::into_inner)
}

fn forget(hidden: &Hidden) {
    unfinished().retain(|other| other.folder != hidden.folder);
}

/// How the names of a target's staging folders begin. Hidden to readers of folders; without `=`, which would
/// make it look like a hive folder.
fn prefix(name: &str) -> String {
    format!(".{}.stillwell-", name.replace('=', "-"))
}

/// Makes `folder` and what is missing above it; returns what was made, outermost first.
fn make_folders(folder: &Path) -> io::Result<Vec<PathBuf>> {
    let missing: Vec<PathBuf> =
        folder.ancestors().take_while(|above| !above.exists()).map(Path::to_path_buf).collect();
    let mut made = Vec::new();
    for folder in missing.into_iter().rev() {
        if let Err(error) = fs::create_dir(&folder)
            && error.kind() != io::ErrorKind::AlreadyExists
        {
            remove_made(&made);
            return Err(error);
        }
        made.push(folder);
    }
    Ok(made)
}

/// The lock file appears under its name only when its lock is held: whoever sees it may trust it.
fn take_lock(folder: &Path) -> io::Result<File> {
    let unnamed = folder.join("lock.new");
    let lock = File::create(&unnamed)?;
    match lock.try_lock() {
        Ok(()) => {}
        Err(fs::TryLockError::WouldBlock) => return Err(io::ErrorKind::ResourceBusy.into()),
        Err(fs::TryLockError::Error(error)) => return Err(error),
    }
    fs::rename(unnamed, folder.join("lock"))?;
    Ok(lock)
}

fn remove(hidden: &Hidden) {
    remove_folder(&hidden.folder);
    remove_made(&hidden.made);
}

/// Tasks of the engine that are being cancelled may still create a file: try again for a moment.
fn remove_folder(folder: &Path) {
    for _ in 0..10 {
        match disk::remove(folder) {
            Err(error) if error.kind() != io::ErrorKind::NotFound => thread::sleep(Duration::from_millis(20)),
            _ => return,
        }
    }
}

/// Removes folders that were made for an output that did not come; those in use by now are kept.
fn remove_made(made: &[PathBuf]) {
    for folder in made.iter().rev() {
        if fs::remove_dir(folder).is_err() {
            return;
        }
    }
}

#[cfg(test)]
mod tests;
