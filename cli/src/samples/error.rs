//! What can keep the demo warehouse from being written.

use std::fmt;
use std::io;
use std::path::PathBuf;

use parquet::errors::ParquetError;

use super::folder::MANIFEST;

/// Why no samples were written. The text says the rule, the value, the place and the remedy.
#[derive(Debug)]
pub(crate) enum SampleError {
    /// `--weeks` outside what the warehouse allows.
    Weeks {
        /// Asked for.
        got: usize,
        /// Fewest allowed.
        least: usize,
        /// Most allowed.
        most: usize,
    },
    /// `--series` outside what the warehouse allows.
    Series {
        /// Asked for.
        got: usize,
        /// Most allowed.
        most: usize,
    },
    /// The place is a file.
    NotAFolder(PathBuf),
    /// The folder holds something and does not carry the list that an earlier run leaves.
    NotOurs(PathBuf),
    /// A file under `sales/` or `truth/` that no earlier run wrote would be read as part of the warehouse.
    Foreign(PathBuf),
    /// The operating system refused.
    Io {
        /// What was being done.
        doing: &'static str,
        /// To which file or folder.
        path: PathBuf,
        /// Its answer.
        source: io::Error,
    },
    /// Parquet could not be written.
    Parquet {
        /// Which file.
        path: PathBuf,
        /// What went wrong.
        source: ParquetError,
    },
}

impl fmt::Display for SampleError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Weeks { got, least, most } => {
                write!(
                    out,
                    "weeks must be between {least} and {most} here, got {got}: give --weeks in that range"
                )
            }
            Self::Series { got, most } => {
                write!(out, "series must be between 1 and {most}, got {got}: give --series in that range")
            }
            Self::NotAFolder(path) => {
                write!(out, "samples go into a folder, and {} is a file: name another place", path.display())
            }
            Self::NotOurs(path) => write!(
                out,
                "{} is not empty and was not written by `stillwell samples` (it has no {MANIFEST}): \
                 name a new or an empty folder",
                path.display()
            ),
            Self::Foreign(path) => write!(
                out,
                "{} was not written by `stillwell samples` and would be read as part of the demo: \
                 move it away, or name another folder",
                path.display()
            ),
            Self::Io { doing, path, source } => {
                write!(out, "cannot {doing} {}: {source}", path.display())?;
                match source.kind() {
                    io::ErrorKind::PermissionDenied => write!(out, "; name a folder that you may write to"),
                    io::ErrorKind::StorageFull => write!(out, "; free some space, or ask for fewer series"),
                    _ => Ok(()),
                }
            }
            Self::Parquet { path, source } => write!(out, "cannot write {}: {source}", path.display()),
        }
    }
}

impl std::error::Error for SampleError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::Io { source, .. } => Some(source),
            Self::Parquet { source, .. } => Some(source),
            _ => None,
        }
    }
}
