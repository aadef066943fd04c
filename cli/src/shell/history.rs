//! Where the lines that were typed are kept.
//!
//! `STILLWELL_HISTORY` names the file, and keeps nothing when it is empty. Else it is `stillwell/history` in the
//! folder of the user's state: `$XDG_STATE_HOME`, by default `~/.local/state` (the XDG Base Directory specification names
//! the history of actions as what belongs there), on Windows `%LOCALAPPDATA%`. Statements may hold names of customers and
//! keys of stores: the folder and the file are for the user alone.

use std::ffi::OsString;
use std::fs;
use std::io;
use std::path::{Path, PathBuf};

/// Entries that are kept.
pub(super) const ENTRIES: usize = 5_000;

/// The file, given a way to look up environment variables; `None` if nothing is to be kept.
pub(super) fn file(variable: impl Fn(&str) -> Option<OsString>) -> Option<PathBuf> {
    if let Some(named) = variable("STILLWELL_HISTORY") {
        return (!named.is_empty()).then(|| named.into());
    }
    // A relative path is to be ignored, by the specification.
    let folder = |name: &str| variable(name).map(PathBuf::from).filter(|path| path.is_absolute());
    let state = folder("XDG_STATE_HOME")
        .or_else(|| folder("LOCALAPPDATA").filter(|_| cfg!(windows)))
        .or_else(|| folder("HOME").map(|home| home.join(".local").join("state")))?;
    Some(state.join("stillwell").join("history"))
}

/// Makes the folders that `file` lies in, those that are missing for the user alone.
///
/// # Errors
/// When the file system refuses.
pub(super) fn make_folder(file: &Path) -> io::Result<()> {
    let Some(folder) = file.parent().filter(|folder| !folder.as_os_str().is_empty()) else { return Ok(()) };
    let mut builder = fs::DirBuilder::new();
    builder.recursive(true);
    #[cfg(unix)]
    std::os::unix::fs::DirBuilderExt::mode(&mut builder, 0o700);
    builder.create(folder)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn found(variables: &[(&str, &str)]) -> Option<PathBuf> {
        file(|name| variables.iter().find(|(known, _)| *known == name).map(|(_, value)| (*value).into()))
    }

    #[test]
    fn the_variable_of_our_own_comes_first() {
        let home = ("HOME", "/home/clerk");
        assert_eq!(found(&[("STILLWELL_HISTORY", "typed"), home]), Some("typed".into()));
        assert_eq!(found(&[("STILLWELL_HISTORY", ""), home]), None);
    }

    #[cfg(unix)]
    #[test]
    fn else_the_state_folder_is_used() {
        let home = ("HOME", "/home/clerk");
        assert_eq!(found(&[home]), Some("/home/clerk/.local/state/stillwell/history".into()));
        assert_eq!(found(&[("XDG_STATE_HOME", "/state"), home]), Some("/state/stillwell/history".into()));
        assert_eq!(found(&[("XDG_STATE_HOME", "state"), home]), found(&[home]));
        assert_eq!(found(&[]), None);
    }

    #[cfg(unix)]
    #[test]
    fn folders_are_for_the_user_alone() {
        use std::os::unix::fs::PermissionsExt;
        let place = tempfile::tempdir().expect("a folder");
        let file = place.path().join("state/stillwell/history");
        make_folder(&file).expect("made");
        let mode = fs::metadata(file.parent().expect("inside")).expect("there").permissions().mode();
        assert_eq!(mode & 0o777, 0o700);
    }
}
