//! The standard streams.
//!
//! The standard output may be closed by whoever reads it (`stillwell query … | head`). A closed pipe is no error: what is written after it is dropped, and [`Out::closed`] tells the writer that it
//! may stop. Other failures, such as a full disk behind a redirection, are errors.

use std::fmt;
use std::io::{self, ErrorKind, IsTerminal, Read, Write};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use crate::exit::{Failure, Outcome};

/// The standard output. Clones share what they know about it.
#[derive(Debug, Clone, Default)]
pub(crate) struct Out {
    closed: Arc<AtomicBool>,
}

impl Out {
    /// Whether nobody reads any more.
    pub(crate) fn closed(&self) -> bool {
        self.closed.load(Ordering::Relaxed)
    }

    /// Writes all of `text`.
    ///
    /// # Errors
    /// When the standard output refuses for another reason than being closed.
    pub(crate) fn say(&mut self, text: impl fmt::Display) -> Outcome<()> {
        write!(self, "{text}")
            .and_then(|()| self.flush())
            .map_err(|error| Failure::failed(format!("cannot write to the standard output: {error}")))
    }

    fn unless_closed<T>(&self, result: io::Result<T>, instead: T) -> io::Result<T> {
        match result {
            Err(error) if error.kind() == ErrorKind::BrokenPipe => {
                self.closed.store(true, Ordering::Relaxed);
                Ok(instead)
            }
            other => other,
        }
    }
}

impl Write for Out {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        if self.closed() {
            return Ok(bytes.len());
        }
        self.unless_closed(io::stdout().write(bytes), bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        if self.closed() {
            return Ok(());
        }
        self.unless_closed(io::stdout().flush(), ())
    }
}

/// Says something on the standard error, for people. If even that is closed, there is nobody to tell.
pub(crate) fn tell(text: impl fmt::Display) {
    let _ = writeln!(io::stderr(), "stillwell: {text}");
}

/// Columns of the terminal that the standard output is, if it is one.
pub(crate) fn terminal_width() -> Option<usize> {
    let size = io::stdout().is_terminal().then(terminal_size::terminal_size).flatten();
    size.map(|(columns, _)| usize::from(columns.0))
}

/// The standard input as text.
///
/// # Errors
/// When it cannot be read or is not UTF-8.
pub(crate) fn read_stdin() -> Outcome<String> {
    let mut text = String::new();
    io::stdin()
        .read_to_string(&mut text)
        .map_err(|error| Failure::usage(format!("cannot read the standard input: {error}")))?;
    Ok(text)
}
