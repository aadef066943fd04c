//! What the shell does with a statement or a word, and what it tells about it.

use std::io::{self, IsTerminal, Write};
use std::time::{Duration, Instant};

use datafusion::execution::context::SessionContext;
use datafusion::sql::parser::Statement;

use super::words::{WORDS, Word};
use super::workers::Workers;
use crate::amounts::counted;
use crate::args::ShellArgs;
use crate::execute::{Show, Step, execute};
use crate::exit::{Exit, Failure, Outcome};
use crate::fits::Fits;
use crate::formats::Format;
use crate::functions;
use crate::interrupt::Interrupt;
use crate::progress::Bar;
use crate::statements::{label, parse_one};
use crate::streams::{self, Out, terminal_width};
use crate::summary::Report;

/// How more rows of a table are to be had here.
const MORE: &str = "rows N shows more, rows 0 all";

/// The keys, for `help` on a terminal.
const KEYS: &str = "\
Keys: Tab completes; Up and Down go through what was typed; Ctrl-R searches it; Ctrl-C stops the statement that runs,
or drops the input; Ctrl-D ends the shell.
";

/// The tables and views, as a statement.
const TABLES: &str = "\
SELECT CASE WHEN table_catalog = 'datafusion' AND table_schema = 'public' THEN table_name
            WHEN table_catalog = 'datafusion' THEN table_schema || '.' || table_name
            ELSE table_catalog || '.' || table_schema || '.' || table_name END AS name,
       CASE table_type WHEN 'VIEW' THEN 'view' ELSE 'table' END AS kind
FROM information_schema.tables WHERE table_schema <> 'information_schema' ORDER BY name";

/// Whether the shell goes on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum After {
    GoOn,
    End,
}

/// A session and how its results are shown.
pub(super) struct Shell {
    context: SessionContext,
    workers: Workers,
    fits: Fits,
    show: Show,
    timing: bool,
    interactive: bool,
    quiet: bool,
    trouble: bool,
    out: Out,
}

impl Shell {
    pub(super) fn new(args: &ShellArgs, context: SessionContext, fits: Fits, interactive: bool) -> Self {
        let format = args.format.unwrap_or(Format::Table);
        Self {
            context,
            workers: Workers::new(args.engine.clone()),
            fits,
            show: Show { format, rows: args.engine.rows_to_look_at() },
            timing: interactive && !args.engine.quiet,
            interactive,
            quiet: args.engine.quiet,
            trouble: false,
            out: Out::default(),
        }
    }

    pub(super) fn context(&self) -> &SessionContext {
        &self.context
    }

    /// Whether any series of any statement was in trouble.
    pub(super) fn had_trouble(&self) -> bool {
        self.trouble
    }

    /// The first line on a terminal.
    pub(super) fn greet(&self) {
        if !self.quiet {
            say(&format!(
                "stillwell {}: a statement ends with ;   help lists what else there is, Ctrl-D ends\n",
                env!("CARGO_PKG_VERSION")
            ));
        }
    }

    /// Tells a failure that does not end the shell.
    ///
    /// # Errors
    /// The failure itself if it does: the process is told to end.
    pub(super) fn told(&self, failure: Failure) -> Outcome<()> {
        if failure.exit == Exit::Terminated {
            return Err(failure);
        }
        streams::tell(failure.message);
        Ok(())
    }

    /// Tells that statements on the same line were not run.
    pub(super) fn tell_left(&self, left: usize) {
        if left > 0 {
            streams::tell(format_args!("{} after it not run", counted(left as u64, "statement")));
        }
    }

    /// Does what a word asks.
    ///
    /// # Errors
    /// When it cannot be done.
    pub(super) async fn obey(&mut self, word: Word, interrupt: &mut Interrupt) -> Outcome<After> {
        match word {
            Word::Help(None) => {
                let keys = if self.interactive { KEYS } else { "" };
                self.out.say(format_args!("{}\n{WORDS}{keys}", functions::list()))?;
            }
            Word::Help(Some(name)) => self.out.say(functions::reference(&name)?)?,
            Word::Tables => self.perform("tables", parse_one(TABLES)?, interrupt).await?,
            Word::Columns(name) => {
                let statement = parse_one(&format!("DESCRIBE {name}"))?;
                self.perform("columns", statement, interrupt).await?;
            }
            Word::Format(format) => {
                refuse_unreadable(format)?;
                self.show.format = format;
            }
            Word::Rows(rows) => self.show.rows = rows,
            Word::Timing(on) => self.timing = on,
            Word::Quit => return Ok(After::End),
        }
        Ok(After::GoOn)
    }

    /// Runs one statement and shows what it gives.
    ///
    /// # Errors
    /// When it fails or is stopped.
    pub(super) async fn run(&mut self, sql: &str, interrupt: &mut Interrupt) -> Outcome<()> {
        let statement = parse_one(sql)?;
        self.perform(&label(&statement), statement, interrupt).await
    }

    async fn perform(&mut self, label: &str, statement: Statement, interrupt: &mut Interrupt) -> Outcome<()> {
        refuse_unreadable(self.show.format)?;
        let begun = Instant::now();
        interrupt.forget();
        // Fits of a statement that was stopped may have ended after it.
        let _ = self.fits.take();
        // Rows that stream to the terminal and a progress line would write over each other.
        let streams_to_terminal = self.show.format != Format::Table && io::stdout().is_terminal();
        let bar = Bar::start(label, &self.fits, self.quiet || streams_to_terminal);
        let work = execute(self.context.clone(), statement, self.show, self.out.clone());
        let done = interrupt.unless_stopped_on(&self.workers.handle()?, work).await;
        drop(bar);
        let mut report = Report::new(1);
        let fitted = self.fits.take();
        let series = fitted.series;
        self.trouble |= fitted.in_trouble > 0;
        let step = match done {
            Ok(step) => step,
            Err(failure) => {
                if failure.exit == Exit::Interrupted {
                    self.workers.abandon();
                }
                report.fitted(fitted);
                self.note(&report);
                return Err(failure);
            }
        };
        let Step { written, table, rows } = step;
        report.finished(written, fitted);
        if let Some(table) = table {
            self.out.say(table.render(terminal_width(), MORE)?)?;
        }
        self.note(&report);
        if self.timing {
            say(&timing(rows, series, begun.elapsed()));
        }
        Ok(())
    }

    fn note(&self, report: &Report) {
        if !self.quiet && (report.has_written() || report.has_trouble()) {
            say(&report.notes());
        }
    }
}

/// Parquet on a terminal is nothing to look at.
fn refuse_unreadable(format: Format) -> Outcome<()> {
    if format == Format::Parquet && io::stdout().is_terminal() {
        return Err(Failure::usage(
            "Parquet is nothing to look at: write COPY (…) TO 'FILE.parquet', or send the output of the shell to a file",
        ));
    }
    Ok(())
}

/// The line after a statement: rows, series, seconds.
fn timing(rows: Option<u64>, series: u64, elapsed: Duration) -> String {
    let seconds = elapsed.as_secs_f64();
    let of_series = match series {
        0 => String::new(),
        series => format!(" of {} series", crate::amounts::count(series)),
    };
    match rows {
        Some(rows) => format!("{}{of_series} in {seconds:.3} s\n", counted(rows, "row")),
        None => format!("done in {seconds:.3} s\n"),
    }
}

/// Says something beside the rows. If the standard error is closed, there is nobody to tell.
fn say(text: &str) {
    let _ = io::stderr().write_all(text.as_bytes());
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_timing_line_tells_rows_series_and_seconds() {
        let elapsed = Duration::from_millis(1_234);
        assert_eq!(timing(Some(1_200), 48, elapsed), "1,200 rows of 48 series in 1.234 s\n");
        assert_eq!(timing(Some(1), 0, elapsed), "1 row in 1.234 s\n");
        assert_eq!(timing(None, 0, elapsed), "done in 1.234 s\n");
    }
}
