//! `stillwell run JOB.sql`: the statements of a job, one after another.
//!
//! A statement that writes files is staged (`copy_staging`); rows of the others are shown as a table. The first
//! failure ends the job. The report at the end says what stands, also after a failure or Ctrl-C.

use std::fs;
use std::path::Path;

use datafusion::execution::context::SessionContext;

use crate::args::{EngineArgs, RunArgs};
use crate::copy_staging;
use crate::execute::{Show, execute};
use crate::exit::{Exit, Failure, Outcome};
use crate::fits::Fits;
use crate::formats::Format;
use crate::interrupt::Interrupt;
use crate::progress::Bar;
use crate::session;
use crate::statements::{self, JobStatement};
use crate::streams::{Out, read_stdin, terminal_width};
use crate::summary::Report;
use crate::table::MORE;

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
    let show = Show { format: Format::Table, rows: options.rows_to_look_at() };
    for statement in statements {
        let place = statement.place;
        let bar = Bar::start(&format!("{place}: {}", statement.label()), fits, options.quiet);
        let step = execute(context.clone(), statement.statement, show, out.clone());
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
            let shown = table.render(terminal_width(), MORE).and_then(|text| out.clone().say(text));
            shown.map_err(|failure| failure.at(place))?;
        }
    }
    Ok(())
}

/// The text of a job; `-` is the standard input.
fn read_job(job: &Path) -> Outcome<String> {
    if job == Path::new("-") {
        return read_stdin();
    }
    fs::read_to_string(job)
        .map_err(|error| Failure::usage(format!("cannot read the job '{}': {error}", job.display())))
}
