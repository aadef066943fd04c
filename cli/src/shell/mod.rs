//! `stillwell shell`: statements as they are typed, or as they come through a pipe.
//!
//! - [`tokens`] reads what is typed with the engine's own tokenizer, [`input`] cuts it into statements,
//! - [`words`] are the lines that are no SQL,
//! - [`names`] and [`completion`] are what the Tab key gives; [`editor`] and [`history`] are the terminal,
//! - [`perform`] runs a statement or a word and tells what came of it, [`workers`] are the threads it runs on.
//!
//! On a terminal an error ends its statement, and Ctrl-C what is running; in a pipe either ends the shell, as it ends
//! a job.

mod completion;
mod editor;
mod history;
mod input;
mod names;
mod perform;
mod tokens;
mod words;
mod workers;

use std::io::{self, BufRead, IsTerminal};
use std::process::{Command, Stdio};

use crate::args::ShellArgs;
use crate::exit::{Exit, Failure, Outcome};
use crate::fits::Fits;
use crate::interrupt::{Habit, Interrupt};
use crate::session;
use crate::statements::Place;

use editor::{Lines, Turn};
use input::{Input, Typed};
use names::Names;
use perform::{After, Shell};
pub(crate) use words::WORDS;

/// What Ctrl-C means to the shell: on a terminal it goes on.
pub(crate) fn habit() -> Habit {
    if io::stdin().is_terminal() { Habit::GoOn(restore_terminal) } else { Habit::End }
}

/// Runs the shell until its input ends.
///
/// # Errors
/// From a pipe: the first failure. From a terminal: only when the terminal itself fails, or the process is told to end.
pub(crate) async fn shell(args: ShellArgs, interrupt: &mut Interrupt) -> Outcome<Exit> {
    let interactive = io::stdin().is_terminal();
    let fits = Fits::default();
    let context = session::open(&args.engine, fits.observed_config()).await?;
    let mut shell = Shell::new(&args, context, fits, interactive);
    if interactive {
        from_terminal(&mut shell, interrupt).await?;
    } else {
        from_pipe(&mut shell, interrupt).await?;
    }
    Ok(if args.engine.strict && shell.had_trouble() { Exit::Trouble } else { Exit::Done })
}

async fn from_terminal(shell: &mut Shell, interrupt: &mut Interrupt) -> Outcome<()> {
    let mut lines = Lines::open()?;
    let mut input = Input::default();
    // The lines of the statement that is being typed, for the history.
    let mut typed = String::new();
    shell.greet();
    lines.know(Names::of_session(shell.context()).await);
    loop {
        let line = match lines.read(&input.prompt(), input.begun())? {
            Turn::Line(line) => line,
            Turn::Dropped => {
                // Several lines are worth having again, to be mended.
                if input.is_open() {
                    lines.remember(&typed);
                }
                input.drop_begun();
                typed.clear();
                continue;
            }
            Turn::End => return Ok(()),
        };
        if !input.is_open()
            && let Some(word) = words::parse(&line)
        {
            lines.remember(&line);
            match word {
                Ok(word) => match shell.obey(word, interrupt).await {
                    Ok(After::GoOn) => {}
                    Ok(After::End) => return Ok(()),
                    Err(failure) => shell.told(failure)?,
                },
                Err(slip) => shell.told(Failure::failed(slip))?,
            }
            continue;
        }
        typed.push_str(&line);
        typed.push('\n');
        let statements = input.push(&line);
        if !input.is_open() {
            lines.remember(&typed);
            typed.clear();
        }
        if statements.is_empty() {
            continue;
        }
        for (at, statement) in statements.iter().enumerate() {
            if let Err(failure) = shell.run(&statement.sql, interrupt).await {
                shell.told(failure)?;
                shell.tell_left(statements.len() - at - 1);
                break;
            }
        }
        lines.know(Names::of_session(shell.context()).await);
    }
}

async fn from_pipe(shell: &mut Shell, interrupt: &mut Interrupt) -> Outcome<()> {
    let mut input = Input::default();
    let mut number = 0;
    let mut line = String::new();
    loop {
        line.clear();
        let read = io::stdin().lock().read_line(&mut line);
        if read.map_err(|error| Failure::usage(format!("cannot read the standard input: {error}")))? == 0 {
            break;
        }
        // Some editors put a mark of the byte order before the text.
        let line = line.trim_start_matches('\u{feff}').trim_end_matches(['\n', '\r']);
        if !input.is_open()
            && let Some(word) = words::parse(line)
        {
            let place = format!("line {}", input.skip_line());
            let word = word.map_err(|slip| Failure::failed(slip).at(&place))?;
            match shell.obey(word, interrupt).await.map_err(|failure| failure.at(&place))? {
                After::GoOn => continue,
                After::End => return Ok(()),
            }
        }
        for statement in input.push(line) {
            number += 1;
            run_placed(shell, &statement, number, interrupt).await?;
        }
    }
    match input.finish() {
        Some(statement) => run_placed(shell, &statement, number + 1, interrupt).await,
        None => Ok(()),
    }
}

async fn run_placed(
    shell: &mut Shell,
    statement: &Typed,
    number: usize,
    interrupt: &mut Interrupt,
) -> Outcome<()> {
    let place = Place { number, line: statement.line };
    // The parser counts lines from the beginning of its text: empty ones before it make them those of the input.
    let before = usize::try_from(statement.line.saturating_sub(1)).unwrap_or(0);
    let sql = format!("{}{}", "\n".repeat(before), statement.sql);
    shell.run(&sql, interrupt).await.map_err(|failure| failure.at(place))
}

/// Gives the terminal back its line discipline when the process has to end at the prompt, where it is switched off for
/// the editor. The editor's own way back is on the thread that waits for a key.
fn restore_terminal() {
    let _ = Command::new("stty").arg("sane").stdout(Stdio::null()).stderr(Stdio::null()).status();
}
