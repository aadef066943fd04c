//! `stillwell`, the command: SQL jobs and queries over Parquet, with the functions of the `stillwell` library.
//!
//! Each verb is a module ([`run`], [`query`], [`functions`], [`demo`]); they share the session ([`session`]),
//! the staging of output ([`copy_staging`]) and the report at the end ([`summary`]).

mod amounts;
mod args;
mod copy_staging;
mod demo;
mod errors;
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
mod run;
mod samples;
mod session;
mod statements;
mod streams;
mod summary;
mod table;

use std::process::ExitCode;

use clap::Parser;

use crate::args::{Cli, EngineArgs, Verb};
use crate::exit::{Exit, Failure, Outcome};
use crate::interrupt::Interrupt;

/// Stack of a worker, in bytes. The engine walks plans and expressions by recursion; a statement with some hundreds
/// of nested terms needs more than the 2 MiB that a thread has otherwise. It is address space, not memory.
const STACK: usize = 64 << 20;

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
            with_engine(&engine, async |interrupt| run::run(args, interrupt).await)
        }
        Verb::Query(args) => {
            let engine = args.engine.clone();
            with_engine(&engine, async |interrupt| query::query(args, interrupt).await)
        }
        Verb::Functions(args) => functions::functions(&args),
        Verb::Samples(args) => demo::samples(&args),
    }
}

/// Runs `work` on as many threads as asked for, listening for Ctrl-C.
fn with_engine(
    options: &EngineArgs,
    work: impl AsyncFnOnce(&mut Interrupt) -> Outcome<Exit>,
) -> Outcome<Exit> {
    let refused = |error| Failure { exit: Exit::Internal, message: format!("cannot start: {error}") };
    let runtime = tokio::runtime::Builder::new_multi_thread()
        .worker_threads(session::threads(options))
        .thread_stack_size(STACK)
        .enable_all()
        .build()
        .map_err(refused)?;
    let mut interrupt = Interrupt::listen().map_err(refused)?;
    let outcome = runtime.block_on(work(&mut interrupt));
    // Work that was cancelled may still hold a thread; nobody waits for it.
    runtime.shutdown_background();
    outcome
}
