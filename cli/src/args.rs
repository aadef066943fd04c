//! The command line: verbs, options and their help.

use std::num::NonZeroUsize;
use std::path::PathBuf;

use clap::{Args, Parser, Subcommand};

use crate::amounts::Bytes;
use crate::exit::EXIT_CODES;
use crate::formats::Format;
use crate::samples;
use crate::shell::WORDS;

/// Where each series of a Parquet warehouse stands, what comes next and what was odd, in SQL
///
/// stillwell fits a structural time series model (level, slope, season, effects of drivers) to every series in a
/// query and gives the answer back as rows: `components`, `forecast` and `diagnostics` stand in the FROM clause
/// of an SQL statement. `stillwell samples demo` writes a warehouse to try it on.
#[derive(Debug, Parser)]
#[command(name = "stillwell", version, after_long_help = EXIT_CODES, max_term_width = 100)]
pub(crate) struct Cli {
    #[command(subcommand)]
    pub(crate) verb: Verb,
}

#[derive(Debug, Subcommand)]
pub(crate) enum Verb {
    Run(RunArgs),
    Query(QueryArgs),
    Shell(ShellArgs),
    Functions(FunctionsArgs),
    Samples(SamplesArgs),
}

/// Run a job: a file of SQL statements, one after another
///
/// The statements are separated by semicolons; comments are those of SQL. CREATE EXTERNAL TABLE, CREATE VIEW,
/// COPY ... TO ... STORED AS PARQUET PARTITIONED BY (...), SET, PREPARE and EXECUTE work, and files can be read
/// directly: FROM 'folder/' or FROM 'folder/*.parquet'. Relative paths in a job count from the current directory,
/// wherever the job file lies.
///
/// What a COPY writes to the local file system appears whole, when its statement has succeeded, or not at all. It
/// replaces what was at its target, so that a job may run again; a folder is replaced only if it holds nothing but
/// files of the format that is written. INSERT INTO adds files to a table's folder.
///
/// A place may also be a URL: s3://bucket/..., gs://, az://, abfs://, abfss:// to read and to write, http:// and
/// https:// to read. Keys and endpoints come from the environment variables AWS_..., GOOGLE_... and AZURE_.... What a
/// COPY writes there appears when its statement has succeeded, object by object; it writes to a folder only while that
/// is empty.
///
/// Rows of plain SELECT statements go to the standard output; progress, and at the end what was written and which
/// series were in trouble, to the standard error. If nobody reads the output any more (a closed pipe), it is
/// dropped and the job goes on.
///
/// The first statement that fails ends the job: what the statements before it wrote stands.
#[derive(Debug, Args)]
#[command(after_long_help = EXIT_CODES)]
pub(crate) struct RunArgs {
    /// The file with the SQL statements; - reads them from the standard input
    #[arg(value_name = "JOB.sql")]
    pub(crate) job: PathBuf,
    #[command(flatten)]
    pub(crate) engine: EngineArgs,
}

/// Run one statement and give its rows as a table, CSV, JSON or Parquet
///
/// Files can be read directly: FROM 'folder/', FROM 'folder/*.parquet' or FROM 's3://bucket/folder/'; relative paths
/// count from the current directory. A table is for reading and shows the first rows; the other formats give all rows
/// and take no memory for them.
#[derive(Debug, Args)]
#[command(after_long_help = EXIT_CODES)]
pub(crate) struct QueryArgs {
    /// The statement; - reads it from the standard input
    #[arg(value_name = "SQL")]
    pub(crate) sql: String,
    /// How the rows are written [default: by the ending of --to, else table]
    #[arg(long, value_enum)]
    pub(crate) format: Option<Format>,
    /// Write to FILE instead of the standard output: whole, once all rows are there, or not at all
    #[arg(long, value_name = "FILE")]
    pub(crate) to: Option<PathBuf>,
    #[command(flatten)]
    pub(crate) engine: EngineArgs,
}

/// Type statements and see their rows
///
/// A statement ends with a semicolon and may take several lines. The Tab key completes keywords, tables, columns, the
/// functions and, inside a call of them, the arguments and their values. Ctrl-C stops the statement that runs, or drops
/// what has been typed; Ctrl-D ends the shell. Statements mean what they mean in a job: COPY writes whole files or
/// none, URLs are read and written.
///
/// The lines typed are kept in ~/.local/state/stillwell/history (below XDG_STATE_HOME where that is set), readable by
/// you alone. The environment variable STILLWELL_HISTORY names another file; if it is empty, nothing is kept. A line
/// that begins with a space is not kept.
///
/// When the standard input is no terminal, statements are read from it and run as they come, without a prompt; the
/// first that fails ends the shell with its exit code.
#[derive(Debug, Args)]
#[command(after_long_help = format!("{WORDS}\n{EXIT_CODES}"))]
pub(crate) struct ShellArgs {
    /// How rows are written [default: table]
    #[arg(long, value_enum)]
    pub(crate) format: Option<Format>,
    #[command(flatten)]
    pub(crate) engine: EngineArgs,
}

/// The SQL reference: all functions, or one
///
/// Without a name: each function with what it gives. With a name: its arguments with their values and defaults,
/// its columns and an example.
#[derive(Debug, Args)]
pub(crate) struct FunctionsArgs {
    /// The function, such as forecast
    #[arg(value_name = "NAME")]
    pub(crate) name: Option<String>,
    /// Print the whole reference as the Markdown page
    #[arg(long, conflicts_with = "name")]
    pub(crate) markdown: bool,
}

/// Write the demo warehouse of the invented Ostrel Creameries
///
/// Without --series: 4 regions and 12 products with a story (gaps, an outage, a late launch, a price rise) and the
/// true states beside the data. With --series: that many series without a story, for load tests. The same options
/// give the same bytes.
#[derive(Debug, Args)]
pub(crate) struct SamplesArgs {
    /// The folder to write to
    #[arg(value_name = "DIR")]
    pub(crate) dir: PathBuf,
    /// Number of series, for a warehouse without a story
    #[arg(long, value_name = "N")]
    pub(crate) series: Option<usize>,
    /// Weeks of history
    #[arg(long, value_name = "N", default_value_t = samples::DEFAULT_WEEKS)]
    pub(crate) weeks: usize,
    /// Seed of the random numbers
    #[arg(long, value_name = "S", default_value_t = samples::DEFAULT_SEED)]
    pub(crate) seed: u64,
}

/// What `run`, `query` and `shell` share.
#[derive(Debug, Clone, Args)]
pub(crate) struct EngineArgs {
    /// Memory the engine may use, such as 512MB or 2GB; sorts and groupings beyond it go to temporary files
    /// [default: no limit]
    #[arg(long, value_name = "AMOUNT")]
    pub(crate) memory_limit: Option<Bytes>,
    /// Threads to work with [default: one per processor]
    #[arg(long, value_name = "N")]
    pub(crate) threads: Option<NonZeroUsize>,
    /// Set an option of the engine, such as datafusion.execution.batch_size=1024; may be repeated
    #[arg(long = "set", value_name = "KEY=VALUE", value_parser = setting)]
    pub(crate) settings: Vec<(String, String)>,
    /// Rows that a table shows; 0 shows all [default: 40; with --to all]
    #[arg(long, value_name = "N")]
    pub(crate) rows: Option<usize>,
    /// End with exit code 3 if any series was in trouble
    #[arg(long)]
    pub(crate) strict: bool,
    /// No progress and no report at the end; errors are still said
    #[arg(short, long)]
    pub(crate) quiet: bool,
}

impl EngineArgs {
    /// Rows that a table on the standard output shows; 0 = all.
    pub(crate) fn rows_to_look_at(&self) -> usize {
        self.rows.unwrap_or(40)
    }
}

fn setting(given: &str) -> Result<(String, String), String> {
    match given.split_once('=') {
        Some((key, value)) if !key.trim().is_empty() => {
            Ok((key.trim().to_string(), value.trim().to_string()))
        }
        _ => Err("write KEY=VALUE, as in datafusion.execution.batch_size=1024".to_string()),
    }
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    use super::*;

    #[test]
    fn the_command_line_is_consistent() {
        Cli::command().debug_assert();
    }

    #[test]
    fn settings_need_a_key() {
        assert_eq!(setting("a.b = 1"), Ok(("a.b".to_string(), "1".to_string())));
        assert!(setting("=1").is_err() && setting("a.b").is_err());
    }
}
