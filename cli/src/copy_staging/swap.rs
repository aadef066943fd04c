//! Putting new content in the place of old content.
//!
//! A file replaces a file by one rename, and a folder appears where none was by one rename: both are atomic, a
//! reader sees the old or the new. A folder cannot be renamed over a folder that is not empty, so there:
//!
//! - Linux and macOS exchange two folders in one step (`RENAME_EXCHANGE`, `RENAME_SWAP`): atomic again;
//! - where the file system cannot do that, the old folder is renamed into the staging folder and then the new
//!   one into its place. Between the two system calls the target is missing; nothing is done in between. A crash
//!   exactly there is mended by [`undo_half`] the next time a job writes to the target.

use std::fs;
use std::io;
use std::path::Path;

/// Puts `new` at `target`. What was at `target` ends at `new` or at `old`; both lie in the staging folder.
///
/// # Errors
/// What the file system says; `target` holds what it held before.
pub(super) fn replace(new: &Path, target: &Path, old: &Path) -> io::Result<()> {
    let Ok(present) = fs::metadata(target) else { return fs::rename(new, target) };
    // Who may read the output stays what it was.
    fs::set_permissions(new, present.permissions())?;
    if !present.is_dir() {
        return fs::rename(new, target);
    }
    match exchange(new, target) {
        Err(error) if cannot_exchange(&error) => two_renames(new, target, old),
        done => done,
    }
}

#[cfg(any(target_os = "linux", target_os = "macos"))]
fn exchange(a: &Path, b: &Path) -> io::Result<()> {
    use rustix::fs::{CWD, RenameFlags, renameat_with};
    Ok(renameat_with(CWD, a, CWD, b, RenameFlags::EXCHANGE)?)
}

#[cfg(not(any(target_os = "linux", target_os = "macos")))]
fn exchange(_: &Path, _: &Path) -> io::Result<()> {
    Err(io::ErrorKind::Unsupported.into())
}

/// The answers of a kernel or file system that knows no exchange (EINVAL, ENOSYS, EOPNOTSUPP), or not of this
/// folder (EXDEV, on layered file systems).
fn cannot_exchange(error: &io::Error) -> bool {
    use io::ErrorKind::{CrossesDevices, InvalidInput, Unsupported};
    matches!(error.kind(), Unsupported | InvalidInput | CrossesDevices)
}

fn two_renames(new: &Path, target: &Path, old: &Path) -> io::Result<()> {
    fs::rename(target, old)?;
    fs::rename(new, target).inspect_err(|_| {
        // The old content goes back; if even that fails, it stays in the staging folder, where undo_half finds it.
        let _ = fs::rename(old, target);
    })
}

/// Finishes a swap that was cut between its two renames: the old content goes back to `target`.
/// Returns whether there was anything to do.
pub(super) fn undo_half(target: &Path, old: &Path) -> io::Result<bool> {
    let half_done = old.exists() && fs::symlink_metadata(target).is_err();
    if half_done {
        fs::rename(old, target)?;
    }
    Ok(half_done)
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Scene(tempfile::TempDir);

    impl Scene {
        fn new() -> Self {
            let scene = Self(tempfile::tempdir().expect("folder"));
            for (folder, text) in [("new", "fresh"), ("target", "stale")] {
                fs::create_dir(scene.at(folder)).expect("made");
                fs::write(scene.at(folder).join("rows.csv"), text).expect("written");
            }
            scene
        }

        fn at(&self, name: &str) -> std::path::PathBuf {
            self.0.path().join(name)
        }

        fn rows(&self, folder: &str) -> String {
            fs::read_to_string(self.at(folder).join("rows.csv")).unwrap_or_default()
        }
    }

    #[test]
    fn a_folder_takes_the_place_of_a_folder() {
        let scene = Scene::new();
        replace(&scene.at("new"), &scene.at("target"), &scene.at("old")).expect("replaced");
        assert_eq!(scene.rows("target"), "fresh");
    }

    #[test]
    fn two_renames_do_the_same_where_folders_cannot_be_exchanged() {
        let scene = Scene::new();
        two_renames(&scene.at("new"), &scene.at("target"), &scene.at("old")).expect("replaced");
        assert_eq!((scene.rows("target"), scene.rows("old")), ("fresh".into(), "stale".into()));
    }

    #[test]
    fn the_old_content_returns_when_the_second_rename_fails() {
        let scene = Scene::new();
        let missing = scene.at("nowhere");
        assert!(two_renames(&missing, &scene.at("target"), &scene.at("old")).is_err());
        assert_eq!(scene.rows("target"), "stale");
    }

    #[test]
    fn a_swap_cut_in_half_is_undone_once() {
        let scene = Scene::new();
        fs::rename(scene.at("target"), scene.at("old")).expect("the first half");
        assert!(undo_half(&scene.at("target"), &scene.at("old")).expect("undone"));
        assert_eq!(scene.rows("target"), "stale");
        assert!(!undo_half(&scene.at("target"), &scene.at("old")).expect("nothing to do"));
    }

    #[test]
    fn content_appears_where_nothing_was() {
        let scene = Scene::new();
        replace(&scene.at("new"), &scene.at("first"), &scene.at("old")).expect("placed");
        assert_eq!(scene.rows("first"), "fresh");
    }
}
