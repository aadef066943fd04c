//! `stillwell run JOB.sql`: the statements of a job, one after another.
//!
//! A statement that writes files is staged (`copy_staging`); rows of the others are shown as a table. The first
//! failure ends the job. The report at the end says what stands, also after a failure or Ctrl-C.

use std::fs;
use std::path::Path;

use arrow::array::AsArray;
use arrow::datatypes::UInt64Type;
use datafusion::common::DataFusionError;
use datafusion::execution::context::SessionContext;
use datafusion::logical_expr::{LogicalPlan, WriteOp};
use futures::StreamExt;

use crate::args::{EngineArgs, RunArgs};
use crate::copy_staging::{self, Written};
use crate::errors;
use crate::exit::{Exit, Failure, Outcome};
use crate::fits::Fits;
use crate::interrupt::Interrupt;
use crate::progress::Bar;
use crate::session;
use crate::statements::{self, JobStatement};
use crate::streams::{Out, read_stdin, terminal_width};
use crate::summary::Report;
use crate::table::Table;

/// Runs the job of `args`.
///
/// # Errors
/// The failure that ended the job, its statement's number and line before the message.
pub(crate) async fn run(args: RunArgs, interrupt: &mut Interrupt) -> Outcome<Exit> {
    let statements = statements::parse(&read_job(&args.job)?)?;
    if statements.is_empty() {
        return Err(Failure::usage(format!("'{}' holds no SQL statement", args.job.display())));
    }
    copy_staging::refuse_conflicts(&statements)?;
    copy_staging::clear_leftovers(
        statements.iter().filter_map(|s| s.copy()).map(|copy| copy.target.as_str()),
    );

    let fits = Fits::default();
    let context = session::open(&args.engine, fits.observed_config()).await?;
    let mut report = Report::new(statements.len());
    let ended = run_all(statements, &args.engine, &context, &fits, interrupt, &mut report).await;
    if !args.engine.quiet {
        report.print();
    }
    ended?;
    Ok(if args.engine.strict && report.has_trouble() { Exit::Trouble } else { Exit::Done })
}

async fn run_all(
    statements: Vec<JobStatement>,
    options: &EngineArgs,
    context: &SessionContext,
    fits: &Fits,
    interrupt: &mut Interrupt,
    report: &mut Report,
) -> Outcome<()> {
    let out = Out::default();
    for statement in statements {
        let place = statement.place;
        let bar = Bar::start(&format!("{place}: {}", statement.label()), fits, options.quiet);
        let step = execute(context.clone(), statement, options.rows_to_look_at(), out.clone());
        let step = interrupt.unless_stopped(step).await;
        drop(bar);
        let done = match step {
            Ok(done) => done,
            Err(failure) => {
                report.fitted(fits.take());
                return Err(failure.at(place));
            }
        };
        report.finished(done.written, fits.take());
        if let Some(table) = done.table {
            let shown = table.render(terminal_width()).and_then(|text| out.clone().say(text));
            shown.map_err(|failure| failure.at(place))?;
        }
    }
    Ok(())
}

/// What a statement has left: files, or rows to show.
struct Step {
    written: Option<Written>,
    table: Option<Table>,
}

async fn execute(context: SessionContext, statement: JobStatement, rows: usize, out: Out) -> Outcome<Step> {
    let engine = |error: DataFusionError| errors::failure(&error);
    let plan = session::plan(&context, statement.statement).await?;
    if out.closed() && only_shows(&plan) {
        return Ok(Step { written: None, table: None });
    }
    let inserted = insert_target(&plan);
    let keeps_keys = context.state().config_options().execution.keep_partition_by_columns;
    let explained = matches!(plan, LogicalPlan::Analyze(_));
    let prepared = copy_staging::prepare(plan, keeps_keys)?;
    let counts = !explained && (prepared.writes() || inserted.is_some());

    let frame = context.execute_logical_plan(prepared.plan.clone()).await.map_err(engine)?;
    let mut stream = frame.execute_stream().await.map_err(engine)?;
    let mut table = Table::new(stream.schema(), rows);
    let mut counted = None;
    while let Some(batch) = stream.next().await {
        let batch = batch.map_err(engine)?;
        if counts {
            let counts = batch.columns().first().and_then(|column| column.as_primitive_opt::<UInt64Type>());
            let added: u64 = counts.map_or(0, |counts| counts.iter().flatten().sum());
            counted = Some(counted.unwrap_or(0) + added);
        } else {
            table.push(&batch);
        }
    }
    drop(stream);
    let written = prepared
        .finish(counted)?
        .or_else(|| inserted.map(|target| Written { target, kind: None, rows: counted, files: None }));
    let table = (!counts && table.has_columns()).then_some(table);
    Ok(Step { written, table })
}

/// Whether a plan does nothing but give rows.
fn only_shows(plan: &LogicalPlan) -> bool {
    !matches!(
        plan,
        LogicalPlan::Ddl(_)
            | LogicalPlan::Dml(_)
            | LogicalPlan::Copy(_)
            | LogicalPlan::Statement(_)
            | LogicalPlan::Analyze(_)
    )
}

/// The table that an INSERT adds to.
fn insert_target(plan: &LogicalPlan) -> Option<String> {
    match plan {
        LogicalPlan::Dml(dml) if matches!(dml.op, WriteOp::Insert(_)) => Some(dml.table_name.to_string()),
        _ => None,
    }
}

/// The text of a job; `-` is the standard input.
fn read_job(job: &Path) -> Outcome<String> {
    if job == Path::new("-") {
        return read_stdin();
    }
    fs::read_to_string(job)
        .map_err(|error| Failure::usage(format!("cannot read the job '{}': {error}", job.display())))
}
