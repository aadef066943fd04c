//! `stillwell`, the command: SQL jobs and queries over Parquet, with the functions of the `stillwell` library.
//!
//! Each verb is a module ([`run`], [`query`], [`shell`], [`functions`], [`demo`]); they share the session ([`session`]),
//! the execution of a statement ([`execute`]), the staging of output ([`copy_staging`]), the stores behind URLs
//! ([`stores`]) and the report at the end ([`summary`]).

mod amounts;
mod args;
mod copy_staging;
mod demo;
mod errors;
mod execute;
mod exit;
mod file_patterns;
mod file_tables;
mod fits;
mod formats;
mod functions;
mod interrupt;
mod nearest;
mod panics;
mod progress;
mod query;
mod rows;
mod run;
mod samples;
mod session;
mod shell;
mod statements;
mod stores;
mod streams;
mod summary;
mod table;
mod threads;

use std::process::ExitCode;

use clap::Parser;

use crate::args::{Cli, EngineArgs, Verb};
use crate::exit::{Exit, Failure, Outcome};
use crate::interrupt::{Habit, Interrupt};

fn main() -> ExitCode {
    panics::note_quietly();
    // Bad options and --help end the process here, by clap's own rules.
    let cli = Cli::parse();
    panics::contained(|| match perform(cli.verb) {
        Ok(exit) => exit,
        Err(failure) => {
            streams::tell(&failure.message);
            failure.exit
        }
    })
    .into()
}

fn perform(verb: Verb) -> Outcome<Exit> {
    match verb {
        Verb::Run(args) => {
            let engine = args.engine.clone();
            with_engine(&engine, Habit::End, async |interrupt| run::run(args, interrupt).await)
        }
        Verb::Query(args) => {
            let engine = args.engine.clone();
            with_engine(&engine, Habit::End, async |interrupt| query::query(args, interrupt).await)
        }
        Verb::Shell(args) => {
            let engine = args.engine.clone();
            let habit = shell::habit();
            with_engine(&engine, habit, async |interrupt| shell::shell(args, interrupt).await)
        }
        Verb::Functions(args) => functions::functions(&args),
        Verb::Samples(args) => demo::samples(&args),
    }
}

/// Runs `work` on as many threads as asked for, listening for Ctrl-C.
fn with_engine(
    options: &EngineArgs,
    habit: Habit,
    work: impl AsyncFnOnce(&mut Interrupt) -> Outcome<Exit>,
) -> Outcome<Exit> {
    let refused = |error| Failure { exit: Exit::Internal, message: format!("cannot start: {error}") };
    let runtime = threads::runtime(options).map_err(refused)?;
    let mut interrupt = Interrupt::listen(habit).map_err(refused)?;
    let outcome = runtime.block_on(work(&mut interrupt));
    // Work that was cancelled may still hold a thread; nobody waits for it.
    runtime.shutdown_background();
    outcome
}
