//! A fault of the program: one calm line instead of a stack of Rust, and exit code 70.
//!
//! A panic is not always the end: the library catches one that happens in the fit of a series and reports it in
//! that series' row. So the hook only notes what happened; the line is printed where a panic really ends the
//! command.

use std::env;
use std::panic::{self, AssertUnwindSafe, PanicHookInfo};
use std::sync::{Mutex, PoisonError};

use crate::copy_staging;
use crate::exit::Exit;
use crate::streams;

/// What the last panic said, and where.
static LAST: Mutex<Option<String>> = Mutex::new(None);

/// Takes note of panics instead of printing them. With `RUST_BACKTRACE` set they are printed too, for developers.
pub(crate) fn note_quietly() {
    let loud = env::var_os("RUST_BACKTRACE").is_some_and(|value| value != "0");
    let default = panic::take_hook();
    panic::set_hook(Box::new(move |fault| {
        *LAST.lock().unwrap_or_else(PoisonError::into_inner) = Some(described(fault));
        if loud {
            default(fault);
        }
    }));
}

/// Runs `work`; a panic that gets out of it removes unfinished output, prints the calm line and ends with 70.
pub(crate) fn contained(work: impl FnOnce() -> Exit) -> Exit {
    panic::catch_unwind(AssertUnwindSafe(work)).unwrap_or_else(|_| {
        copy_staging::remove_all_unfinished();
        streams::tell(calm_line());
        Exit::Internal
    })
}

/// The message about the last panic.
pub(crate) fn calm_line() -> String {
    let noted = LAST.lock().unwrap_or_else(PoisonError::into_inner).clone();
    format!(
        "a fault of this program, not of your data or job ({}). Please report this line together with the statement \
         that was running",
        noted.as_deref().unwrap_or("no further word")
    )
}

fn described(fault: &PanicHookInfo<'_>) -> String {
    let what = fault.payload_as_str().unwrap_or_default().lines().next().unwrap_or_default();
    let place = fault.location().map(|l| format!("{}:{}", short(l.file()), l.line())).unwrap_or_default();
    format!("{what}; {place}")
}

/// The last three parts of a source path: enough to find the place, without the folders of a build machine.
fn short(file: &str) -> String {
    let parts: Vec<&str> = file.rsplit(['/', '\\']).take(3).collect();
    parts.into_iter().rev().collect::<Vec<_>>().join("/")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn source_paths_are_shortened() {
        assert_eq!(short("/builds/x/crates/engine-1.0/src/sort/merge.rs"), "src/sort/merge.rs");
        assert_eq!(short("main.rs"), "main.rs");
    }

    #[test]
    fn a_panic_becomes_an_exit_code() {
        assert_eq!(contained(|| panic!("expected in this test")), Exit::Internal);
        assert_eq!(contained(|| Exit::Usage), Exit::Usage);
    }
}
