//! `stillwell query "SELECT …"`: one statement, its rows in one of several formats.

use std::fs::File;
use std::io::{self, BufWriter, IsTerminal};
use std::path::PathBuf;

use datafusion::common::DataFusionError;
use datafusion::execution::context::SessionContext;
use datafusion::logical_expr::LogicalPlan;
use datafusion::sql::parser::Statement;

use crate::args::{EngineArgs, QueryArgs};
use crate::copy_staging::{Kind, Staging, Target, Written};
use crate::errors;
use crate::exit::{Exit, Failure, Outcome};
use crate::fits::Fits;
use crate::formats::Format;
use crate::interrupt::Interrupt;
use crate::progress::Bar;
use crate::rows::{TableSize, write_rows};
use crate::session;
use crate::statements;
use crate::streams::{Out, read_stdin, terminal_width};
use crate::summary::Report;

/// Runs the statement of `args` and writes its rows.
///
/// # Errors
/// The failure of the statement or of the output; with `--to` no file has appeared then.
pub(crate) async fn query(args: QueryArgs, interrupt: &mut Interrupt) -> Outcome<Exit> {
    let format = choose_format(&args, io::stdout().is_terminal())?;
    let sql = if args.sql == "-" { read_stdin()? } else { args.sql };
    let statement = only_statement(&sql)?;
    let fits = Fits::default();
    let context = session::open(&args.engine, fits.observed_config()).await?;
    let mut report = Report::new(1);

    // Rows that stream to the terminal and a progress line would write over each other.
    let streams_to_terminal = args.to.is_none() && format != Format::Table && io::stdout().is_terminal();
    let bar = Bar::start("query", &fits, args.engine.quiet || streams_to_terminal);
    let done =
        interrupt.unless_stopped(execute(context, statement, format, args.to, args.engine.clone())).await;
    drop(bar);
    match &done {
        Ok(written) => report.finished(written.clone(), fits.take()),
        Err(_) => report.fitted(fits.take()),
    }
    if !args.engine.quiet && (report.has_written() || report.has_trouble()) {
        report.print();
    }
    done?;
    Ok(if args.engine.strict && report.has_trouble() { Exit::Trouble } else { Exit::Done })
}

fn choose_format(args: &QueryArgs, to_terminal: bool) -> Outcome<Format> {
    match (args.format, &args.to) {
        (Some(Format::Parquet), None) if to_terminal => {
            Err(Failure::usage("Parquet is nothing to look at: give --to FILE, or send the output to a file or a pipe"))
        }
        (Some(format), _) => Ok(format),
        (None, None) => Ok(Format::Table),
        (None, Some(file)) => Format::of_ending(file).ok_or_else(|| {
            Failure::usage(format!(
                "the ending of '{}' tells no format: end it in .csv, .json, .ndjson, .jsonl, .parquet or .txt \
                 (table), or give --format",
                file.display()
            ))
        }),
    }
}

fn only_statement(sql: &str) -> Outcome<Statement> {
    let mut statements = statements::parse(sql)?;
    match (statements.len(), statements.pop()) {
        (1, Some(only)) => Ok(only.statement),
        (0, _) => Err(Failure::usage("there is no statement to run")),
        (several, _) => Err(Failure::usage(format!(
            "query takes one statement and got {several}; write them to a file and use: stillwell run FILE"
        ))),
    }
}

async fn execute(
    context: SessionContext,
    statement: Statement,
    format: Format,
    to: Option<PathBuf>,
    options: EngineArgs,
) -> Outcome<Option<Written>> {
    let engine = |error: DataFusionError| errors::failure(&error);
    let plan = session::plan(&context, statement).await?;
    if let LogicalPlan::Copy(_) | LogicalPlan::Ddl(_) | LogicalPlan::Dml(_) | LogicalPlan::Statement(_) = plan
    {
        return Err(Failure::usage(
            "query takes a statement that gives rows and changes nothing; to write files use --to FILE, or put the \
             statement into a job: stillwell run JOB.sql",
        ));
    }
    if let LogicalPlan::Analyze(analyze) = &plan
        && matches!(*analyze.input, LogicalPlan::Copy(_) | LogicalPlan::Dml(_))
    {
        return Err(Failure::usage(
            "EXPLAIN ANALYZE runs its statement, and this one writes; use stillwell run",
        ));
    }
    // The place is checked before the work, not after it.
    let staged =
        to.map(|file| Staging::open(Target::file(&file)?).map(|staging| (file, staging))).transpose()?;
    let frame = context.execute_logical_plan(plan).await.map_err(engine)?;
    let stream = frame.execute_stream().await.map_err(engine)?;
    let Some((file, staging)) = staged else {
        let out = Out::default();
        let table = TableSize { rows: options.rows_to_look_at(), width: terminal_width() };
        write_rows(stream, format, BufWriter::new(out.clone()), table, &out).await?;
        return Ok(None);
    };
    let refused = |error| Failure::failed(format!("cannot write '{}': {error}", file.display()));
    let sink = BufWriter::new(File::create(staging.content()).map_err(refused)?);
    let table = TableSize { rows: options.rows.unwrap_or(0), width: None };
    let rows = write_rows(stream, format, sink, table, &Out::default()).await?;
    let files = staging.put_in_place(None)?;
    let target = file.display().to_string();
    Ok(Some(Written { target, kind: Some(Kind::File), rows: Some(rows), files: Some(files) }))
}
