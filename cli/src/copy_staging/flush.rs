//! Flushing new content to the disk before it takes the place of the old: a rename must not reach the disk before
//! the bytes it makes visible do.
//!
//! A flush waits for the disk, some milliseconds each; a folder of hundreds of files is flushed by several threads,
//! whose waits the file system joins.

use std::fs::{self, File};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::thread;

use super::contents::files_below;

/// Threads that wait for the disk at the same time.
const WAITING: usize = 16;

/// Flushes all files and folders at or below `path`.
///
/// # Errors
/// When a file cannot be flushed: the disk is full or broken.
pub(super) fn all_below(path: &Path) -> io::Result<()> {
    let files = files_below(path)?;
    let next = AtomicUsize::new(0);
    let flush_some = || {
        while let Some(file) = files.get(next.fetch_add(1, Ordering::Relaxed)) {
            File::open(file)?.sync_all()?;
        }
        Ok(())
    };
    thread::scope(|scope| {
        let threads: Vec<_> = (0..WAITING.min(files.len())).map(|_| scope.spawn(flush_some)).collect();
        threads.into_iter().try_for_each(|thread| {
            thread.join().unwrap_or_else(|_| Err(io::Error::other("a thread that flushes files has failed")))
        })
    })?;
    folders_below(path)?.iter().for_each(|inner| folder(inner));
    Ok(())
}

/// Flushes the names in a folder. Not every system can; where it cannot, a rename is as durable as that system
/// makes it.
pub(super) fn folder(path: &Path) {
    if let Ok(opened) = File::open(path) {
        let _ = opened.sync_all();
    }
}

fn folders_below(path: &Path) -> io::Result<Vec<PathBuf>> {
    if !path.is_dir() {
        return Ok(Vec::new());
    }
    let mut folders = Vec::new();
    for entry in fs::read_dir(path)? {
        folders.extend(folders_below(&entry?.path())?);
    }
    folders.push(path.to_path_buf());
    Ok(folders)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn files_at_every_depth_are_flushed_and_missing_ones_are_errors() {
        let place = tempfile::tempdir().expect("a folder");
        for number in 0..40 {
            let folder = place.path().join(format!("depot={}", number % 7));
            fs::create_dir_all(&folder).expect("made");
            fs::write(folder.join(format!("{number}.csv")), "a\n").expect("written");
        }
        assert_eq!(folders_below(place.path()).expect("listed").len(), 8);
        all_below(place.path()).expect("flushed");
        assert!(all_below(&place.path().join("missing")).is_err());
    }
}
