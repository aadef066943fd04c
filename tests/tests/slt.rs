//! The SQL records in `slt/`: each file is a session of its own, each record a statement and what it must answer.
//!
//! Files are written in the language of the `sqllogictest` crate, with three conventions: numbers that a fit gives
//! go through `round(x, 6)` or fewer digits, `<slt:ignore>` stands for the volatile part of a line, and a column of
//! several lines (a plan) becomes one numbered row per line.
//!
//!     STILLWELL_SLT=complete cargo test -p stillwell-tests slt
//!
//! writes what the statements answer into the files instead of comparing: read the difference before keeping it.
//! `STILLWELL_SLT_FILES=forecast,plans` takes only these files.

mod answer;
mod compare;

use std::collections::VecDeque;
use std::env;
use std::error::Error;
use std::fmt;
use std::fs;
use std::path::{Path, PathBuf};
use std::sync::{Mutex, PoisonError};
use std::thread;
use std::time::Instant;

use async_trait::async_trait;
use datafusion::error::DataFusionError;
use datafusion::prelude::{SessionConfig, SessionContext};
use sqllogictest::{AsyncDB, DBOutput, MakeConnection, Runner, default_normalizer, strict_column_validator};

use crate::support;
use answer::Kind;
use compare::same_but_for_ignored;

/// Files in work at once; one when they are rewritten, because they share `sales.inc`.
const WORKERS: usize = 2;

/// Plans name their partitions, so the number must not depend on the machine.
const PARTITIONS: usize = 4;

#[test]
fn every_record_holds() {
    let files = Mutex::new(VecDeque::from(files()));
    let complete = match env::var("STILLWELL_SLT") {
        Ok(word) if word == "complete" => true,
        Ok(word) if !word.is_empty() => panic!("STILLWELL_SLT is '{word}'; it takes 'complete'"),
        _ => false,
    };
    let failures = Mutex::new(Vec::new());
    let workers = if complete { 1 } else { WORKERS };
    thread::scope(|scope| {
        for _ in 0..workers {
            scope.spawn(|| {
                let next = || files.lock().unwrap_or_else(PoisonError::into_inner).pop_front();
                while let Some(file) = next() {
                    let begin = Instant::now();
                    let outcome = run(&file, complete);
                    println!("{:7.1} s  {}", begin.elapsed().as_secs_f64(), file.display());
                    if let Err(failure) = outcome {
                        failures.lock().unwrap_or_else(PoisonError::into_inner).push(failure);
                    }
                }
            });
        }
    });
    let failures = failures.into_inner().unwrap_or_else(PoisonError::into_inner);
    assert!(failures.is_empty(), "{} file(s) fail:\n\n{}", failures.len(), failures.join("\n\n"));
}

#[test]
fn every_status_has_a_record() {
    // Those of functions with troubles of their own stand beside their other records.
    let read =
        |name: &str| fs::read_to_string(support::ROOT.join("tests/slt").join(name)).expect("the records");
    let records = ["troubles.slt", "state_space.slt", "fits.slt"].map(read).join("\n\n");
    let answers = records.split("\n----\n").skip(1).collect::<Vec<_>>();
    for status in stillwell::statuses() {
        // A line begins with the depot, which may be named after its status.
        let says = |line: &str| line.strip_prefix(status).unwrap_or(line).contains(status);
        let shown = answers.iter().any(|answer| answer.lines().take_while(|line| !line.is_empty()).any(says));
        assert!(shown, "no record answers '{status}'");
    }
}

/// The files asked for, in the order of their names.
fn files() -> Vec<PathBuf> {
    let wanted = env::var("STILLWELL_SLT_FILES").unwrap_or_default();
    let wanted = wanted.split(',').map(str::trim).filter(|name| !name.is_empty()).collect::<Vec<_>>();
    let mut files = Vec::new();
    collect(&support::ROOT.join("tests/slt"), &mut files);
    files.sort();
    assert!(files.len() > 5, "the records are missing: found {files:?}");
    if !wanted.is_empty() {
        files.retain(|file| file.file_stem().is_some_and(|stem| wanted.iter().any(|name| *name == stem)));
        assert!(!files.is_empty(), "STILLWELL_SLT_FILES names none of the files");
    }
    files
}

fn collect(folder: &Path, files: &mut Vec<PathBuf>) {
    for entry in folder.read_dir().expect("the folder of the records") {
        let path = entry.expect("a file of the records").path();
        if path.is_dir() {
            collect(&path, files);
        } else if path.extension().is_some_and(|extension| extension == "slt") {
            files.push(path);
        }
    }
}

/// Runs or rewrites one file.
fn run(file: &Path, complete: bool) -> Result<(), String> {
    let runtime = tokio::runtime::Builder::new_multi_thread().worker_threads(2).enable_all().build();
    let mut runner = Runner::new(|| async { Ok(Session::new()) });
    runner.with_column_validator(strict_column_validator);
    runner.with_validator(same_but_for_ignored);
    runtime.map_err(|error| error.to_string())?.block_on(work(&mut runner, file, complete))
}

async fn work<M>(runner: &mut Runner<Session, M>, file: &Path, complete: bool) -> Result<(), String>
where
    M: MakeConnection<Conn = Session>,
{
    if complete {
        let updated = runner.update_test_file(
            file,
            " ",
            same_but_for_ignored,
            default_normalizer,
            strict_column_validator,
        );
        return updated.await.map_err(|error| format!("{}: {error}", file.display()));
    }
    runner.run_file_async(file).await.map_err(|error| error.display(false).to_string())
}

/// The session of one file.
struct Session {
    context: SessionContext,
}

impl Session {
    fn new() -> Self {
        let config = SessionConfig::new().with_target_partitions(PARTITIONS).with_information_schema(true);
        Self { context: support::session_with(config) }
    }
}

/// What the engine said, without the backtrace that some builds append.
#[derive(Debug)]
struct Said(String);

impl fmt::Display for Said {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl Error for Said {}

impl From<DataFusionError> for Said {
    fn from(error: DataFusionError) -> Self {
        Self(error.strip_backtrace())
    }
}

#[async_trait]
impl AsyncDB for Session {
    type Error = Said;
    type ColumnType = Kind;

    async fn run(&mut self, sql: &str) -> Result<DBOutput<Kind>, Said> {
        let batch = support::query(&self.context, sql).await?;
        if batch.num_columns() == 0 {
            return Ok(DBOutput::StatementComplete(0));
        }
        let types = batch.schema().fields().iter().map(|field| Kind::of(field.data_type())).collect();
        let rows = answer::rows(&batch).map_err(|error| Said(error.to_string()))?;
        Ok(DBOutput::Rows { types, rows })
    }

    async fn shutdown(&mut self) {}

    fn engine_name(&self) -> &str {
        "stillwell"
    }
}
