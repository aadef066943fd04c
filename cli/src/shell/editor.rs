//! Lines from a terminal: rustyline with our completion and history.

use std::env;
use std::io::{self, IsTerminal};
use std::path::PathBuf;

use rustyline::completion::{Completer, Pair};
use rustyline::config::{Behavior, BellStyle, CompletionType, Config};
use rustyline::error::ReadlineError;
use rustyline::highlight::Highlighter;
use rustyline::hint::Hinter;
use rustyline::history::FileHistory;
use rustyline::validate::Validator;
use rustyline::{Context, Editor, Helper};

use super::completion::complete;
use super::history;
use super::names::Names;
use crate::exit::{Failure, Outcome};
use crate::streams;

/// What somebody did at the prompt.
#[derive(Debug, PartialEq, Eq)]
pub(super) enum Turn {
    Line(String),
    /// Ctrl-C: what has been typed is dropped.
    Dropped,
    /// Ctrl-D.
    End,
}

/// The editor of lines.
pub(super) struct Lines {
    editor: Editor<Aid, FileHistory>,
    /// Where the history is kept, as long as that works.
    history: Option<PathBuf>,
}

impl Lines {
    /// Opens the terminal and reads the history.
    ///
    /// # Errors
    /// When the terminal cannot be used.
    pub(super) fn open() -> Outcome<Self> {
        let config = Config::builder()
            .max_history_size(history::ENTRIES)
            .and_then(|config| config.history_ignore_dups(true))
            .map_err(|error| refused(&error))?
            .history_ignore_space(true)
            .completion_type(CompletionType::List)
            .bell_style(BellStyle::None)
            // With the rows going to a file, lines are still edited on the terminal.
            .behavior(if io::stdout().is_terminal() { Behavior::Stdio } else { Behavior::PreferTerm })
            .build();
        let mut editor = Editor::with_config(config).map_err(|error| refused(&error))?;
        editor.set_helper(Some(Aid::default()));
        let history = history::file(|name| env::var_os(name));
        if let Some(file) = &history {
            // The first time there is none.
            let _ = editor.load_history(file);
        }
        Ok(Self { editor, history })
    }

    /// What can be completed from now on.
    pub(super) fn know(&mut self, names: Names) {
        if let Some(aid) = self.editor.helper_mut() {
            aid.names = names;
        }
    }

    /// Asks for a line. `begun`: the lines of the statement before it.
    ///
    /// # Errors
    /// When the terminal fails.
    pub(super) fn read(&mut self, prompt: &str, begun: &str) -> Outcome<Turn> {
        if let Some(aid) = self.editor.helper_mut() {
            aid.begun = begun.to_string();
        }
        match self.editor.readline(prompt) {
            Ok(line) => Ok(Turn::Line(line)),
            Err(ReadlineError::Interrupted) => Ok(Turn::Dropped),
            Err(ReadlineError::Eof) => Ok(Turn::End),
            Err(error) => Err(refused(&error)),
        }
    }

    /// Keeps what was typed. A file that cannot be written is told once; the lines are at hand until the shell ends.
    pub(super) fn remember(&mut self, typed: &str) {
        if !self.editor.add_history_entry(typed.trim_end()).unwrap_or(false) {
            return;
        }
        let Some(file) = &self.history else { return };
        let made = history::make_folder(file).map_err(ReadlineError::Io);
        if let Err(error) = made.and_then(|()| self.editor.append_history(file)) {
            streams::tell(format_args!(
                "cannot keep what is typed in '{}': {error}; STILLWELL_HISTORY names another file, or none if it is empty",
                file.display()
            ));
            self.history = None;
        }
    }
}

fn refused(error: &ReadlineError) -> Failure {
    Failure::failed(format!("cannot read from the terminal: {error}"))
}

/// What the editor asks while a line is typed.
#[derive(Default)]
struct Aid {
    names: Names,
    /// The lines of the statement before the one that is edited.
    begun: String,
}

impl Completer for Aid {
    type Candidate = Pair;

    fn complete(&self, line: &str, cursor: usize, _: &Context<'_>) -> rustyline::Result<(usize, Vec<Pair>)> {
        let completion = complete(&format!("{}{line}", self.begun), self.begun.len() + cursor, &self.names);
        // What began on an earlier line cannot be replaced.
        let Some(from) = completion.from.checked_sub(self.begun.len()) else {
            return Ok((cursor, Vec::new()));
        };
        let pair = |candidate: super::completion::Candidate| Pair {
            display: candidate.shown,
            replacement: candidate.text,
        };
        Ok((from, completion.candidates.into_iter().map(pair).collect()))
    }
}

impl Hinter for Aid {
    type Hint = String;
}

impl Highlighter for Aid {}
impl Validator for Aid {}
impl Helper for Aid {}
