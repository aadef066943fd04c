//! Many small waits for the disk, several at a time.
//!
//! Flushing or removing a file waits for the disk some milliseconds. A folder partitioned by a thousand values has as
//! many files; one after another they would take longer than to compute them. The file system joins waits that happen
//! together.
//!
//! New content is flushed before it takes the place of the old: a rename must not reach the disk before the bytes it
//! makes visible do.

use std::fs::{self, File};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::thread;

/// Threads that wait for the disk at the same time.
const WAITING: usize = 16;

/// The files and the folders of a tree, each folder before what is in it.
#[derive(Debug, Default)]
pub(super) struct Tree {
    pub(super) files: Vec<PathBuf>,
    folders: Vec<PathBuf>,
}

impl Tree {
    /// What is at and below `path`.
    ///
    /// # Errors
    /// When a folder cannot be read.
    pub(super) fn at(path: &Path) -> io::Result<Self> {
        let mut tree = Self::default();
        tree.collect(path)?;
        Ok(tree)
    }

    fn collect(&mut self, path: &Path) -> io::Result<()> {
        if !fs::symlink_metadata(path)?.is_dir() {
            self.files.push(path.to_path_buf());
            return Ok(());
        }
        self.folders.push(path.to_path_buf());
        for entry in fs::read_dir(path)? {
            self.collect(&entry?.path())?;
        }
        Ok(())
    }

    /// Flushes all of it to the disk.
    ///
    /// # Errors
    /// When a file cannot be flushed: the disk is full or broken.
    pub(super) fn flush(&self) -> io::Result<()> {
        together(&self.files, |file| File::open(file)?.sync_all())?;
        together(&self.folders, |folder| {
            flush_folder(folder);
            Ok(())
        })
    }
}

/// Flushes the names in a folder. Not every system can; where it cannot, a rename is as durable as that system makes
/// it.
pub(super) fn flush_folder(path: &Path) {
    if let Ok(opened) = File::open(path) {
        let _ = opened.sync_all();
    }
}

/// Removes a folder with all that is in it.
///
/// # Errors
/// When something in it cannot be removed, such as a folder in which a file has just been made.
pub(super) fn remove(folder: &Path) -> io::Result<()> {
    let tree = Tree::at(folder)?;
    // What fails here is met again, and reported, below.
    let _ = together(&tree.files, |file| fs::remove_file(file));
    // The folders that held files are empty now; those that held folders go last.
    let _ = together(&tree.folders, |folder| {
        let _ = fs::remove_dir(folder);
        Ok(())
    });
    match fs::remove_dir_all(folder) {
        Err(error) if error.kind() != io::ErrorKind::NotFound => Err(error),
        _ => Ok(()),
    }
}

fn together<P: AsRef<Path> + Sync>(
    paths: &[P],
    act: impl Fn(&Path) -> io::Result<()> + Sync,
) -> io::Result<()> {
    let next = AtomicUsize::new(0);
    let act_on_some = || {
        while let Some(path) = paths.get(next.fetch_add(1, Ordering::Relaxed)) {
            act(path.as_ref())?;
        }
        Ok(())
    };
    if paths.len() < 2 {
        return act_on_some();
    }
    thread::scope(|scope| {
        let threads: Vec<_> = (0..WAITING.min(paths.len())).map(|_| scope.spawn(act_on_some)).collect();
        threads.into_iter().try_for_each(|thread| {
            thread
                .join()
                .unwrap_or_else(|_| Err(io::Error::other("a thread that waits for the disk has failed")))
        })
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn tree() -> tempfile::TempDir {
        let place = tempfile::tempdir().expect("a folder");
        for number in 0..40 {
            let folder = place.path().join(format!("out/depot={}/year={}", number % 3, number % 2));
            fs::create_dir_all(&folder).expect("made");
            fs::write(folder.join(format!("{number}.csv")), "a\n").expect("written");
        }
        place
    }

    #[test]
    fn everything_at_every_depth_is_flushed() {
        let place = tree();
        let found = Tree::at(&place.path().join("out")).expect("read");
        assert_eq!((found.files.len(), found.folders.len()), (40, 1 + 3 + 6));
        found.flush().expect("flushed");
    }

    #[test]
    fn a_file_that_is_gone_is_an_error() {
        let place = tree();
        let found = Tree::at(place.path()).expect("read");
        fs::remove_file(&found.files[7]).expect("removed");
        assert!(found.flush().is_err());
    }

    #[test]
    fn a_folder_is_removed_whole_and_its_neighbour_stays() {
        let place = tree();
        fs::write(place.path().join("kept"), "").expect("written");
        remove(&place.path().join("out")).expect("removed");
        let left: Vec<_> = fs::read_dir(place.path()).expect("readable").collect();
        assert_eq!(left.len(), 1);
    }

    #[cfg(unix)]
    #[test]
    fn a_link_is_removed_and_what_it_points_at_is_not() {
        let place = tree();
        let outside = tree();
        std::os::unix::fs::symlink(outside.path(), place.path().join("out/link")).expect("linked");
        remove(&place.path().join("out")).expect("removed");
        assert!(outside.path().join("out").exists());
    }
}
