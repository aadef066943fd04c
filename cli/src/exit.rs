//! How a verb ends: the exit codes, and a failure with its one message.
//!
//! The codes are part of the interface: scripts branch on them, so they are listed in `--help` and in the
//! README and do not change.

use std::fmt;
use std::process::ExitCode;

/// The exit codes of the command.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Exit {
    /// Everything asked for was done.
    Done,
    /// A statement failed; those before it stand, those after it were not run.
    Failed,
    /// The command line cannot be used: a bad option, a job file that is not there.
    Usage,
    /// With `--strict`: everything was done, but some series were in trouble.
    Trouble,
    /// A fault of the program itself.
    Internal,
    /// Stopped by Ctrl-C (SIGINT).
    Interrupted,
    /// Stopped by SIGTERM.
    Terminated,
}

/// What `--help` says about the codes.
pub(crate) const EXIT_CODES: &str = "\
Exit codes:
    0  done
    1  a statement failed; what the statements before it wrote stands
    2  the command line cannot be used (bad option, missing job file)
    3  with --strict only: done, but some series were in trouble
   70  a fault of this program
  130  stopped by Ctrl-C
  143  stopped by SIGTERM";

impl Exit {
    /// The number the process ends with.
    pub(crate) fn code(self) -> u8 {
        match self {
            Self::Done => 0,
            Self::Failed => 1,
            Self::Usage => 2,
            Self::Trouble => 3,
            Self::Internal => 70,
            Self::Interrupted => 130,
            Self::Terminated => 143,
        }
    }
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(exit.code())
    }
}

/// Why a verb ends early: the exit code, and the message a person reads.
#[derive(Debug)]
pub(crate) struct Failure {
    pub(crate) exit: Exit,
    pub(crate) message: String,
}

/// The outcome of a step of a verb.
pub(crate) type Outcome<T> = Result<T, Failure>;

impl Failure {
    /// Work that was started and did not succeed (exit code 1).
    pub(crate) fn failed(message: impl Into<String>) -> Self {
        Self { exit: Exit::Failed, message: message.into() }
    }

    /// A command line that cannot be used (exit code 2).
    pub(crate) fn usage(message: impl Into<String>) -> Self {
        Self { exit: Exit::Usage, message: message.into() }
    }

    /// The end after a signal.
    pub(crate) fn stopped(exit: Exit) -> Self {
        Self { exit, message: "stopped; what was not finished is removed".to_string() }
    }

    /// The same failure, its message led by the place it belongs to.
    pub(crate) fn at(mut self, place: impl fmt::Display) -> Self {
        self.message = format!("{place}: {}", self.message);
        self
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_help_text_names_every_code() {
        let all = [
            Exit::Done,
            Exit::Failed,
            Exit::Usage,
            Exit::Trouble,
            Exit::Internal,
            Exit::Interrupted,
            Exit::Terminated,
        ];
        for exit in all {
            let listed = EXIT_CODES.lines().any(|line| {
                line.split_whitespace().next().is_some_and(|word| word == exit.code().to_string())
            });
            assert!(listed, "{exit:?} is missing in --help");
        }
    }

    #[test]
    fn a_place_leads_a_message() {
        assert_eq!(
            Failure::failed("no such column").at("statement 2").message,
            "statement 2: no such column"
        );
    }
}
