//! What the benches of the command share: the warehouse, the jobs on it, a run of the command and what it took.

use std::env;
use std::error::Error;
use std::fs;
use std::path::Path;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::thread::sleep;
use std::time::{Duration, Instant};

pub(crate) type Outcome<T> = Result<T, Box<dyn Error>>;

const COMMAND: &str = env!("CARGO_BIN_EXE_stillwell");

/// Steps that are forecast.
pub(crate) const HORIZON: usize = 13;

/// How often the memory of the running command is looked at, and whether it has ended.
const LOOK: Duration = Duration::from_millis(5);

/// What a run took.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Took {
    pub(crate) seconds: f64,
    /// Most memory it had, in bytes, where the system tells (Linux).
    pub(crate) memory: Option<u64>,
}

/// A size from the environment.
pub(crate) fn size(name: &str, usual: usize) -> Outcome<usize> {
    match env::var(name) {
        Ok(text) => text.parse().map_err(|_| format!("{name} is '{text}'; it takes a whole number").into()),
        Err(_) => Ok(usual),
    }
}

/// Runs the command in a folder; it must succeed.
pub(crate) fn stillwell(folder: &Path, arguments: &[&str]) -> Outcome<Took> {
    let errors = folder.join("errors.txt");
    let begin = Instant::now();
    let mut child = Command::new(COMMAND)
        .args(arguments)
        .current_dir(folder)
        .stdin(Stdio::null())
        .stdout(Stdio::null())
        .stderr(fs::File::create(&errors)?)
        .spawn()?;
    let (status, memory) = watch(&mut child)?;
    let seconds = begin.elapsed().as_secs_f64();
    if status.success() {
        return Ok(Took { seconds, memory });
    }
    Err(format!("stillwell {}: {}", arguments.join(" "), fs::read_to_string(&errors)?).into())
}

/// Waits for the end; the most memory that was seen until then.
fn watch(child: &mut Child) -> Outcome<(ExitStatus, Option<u64>)> {
    let place = format!("/proc/{}/status", child.id());
    let mut memory = None;
    loop {
        if let Some(status) = child.try_wait()? {
            return Ok((status, memory));
        }
        memory = high_water(&fs::read_to_string(&place).unwrap_or_default()).max(memory);
        sleep(LOOK);
    }
}

/// The line `VmHWM` of a process's status, in bytes.
fn high_water(status: &str) -> Option<u64> {
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"))?;
    line.trim().strip_suffix("kB")?.trim().parse::<u64>().ok().map(|kib| kib * 1024)
}

/// The best run of a job: what else the machine does only ever adds to the time. Memory is the most of all runs.
pub(crate) fn best(folder: &Path, name: &str, sql: &str, options: &[&str], runs: usize) -> Outcome<Took> {
    let file = format!("{name}.sql");
    fs::write(folder.join(&file), sql)?;
    let arguments = [&["run", &file, "--quiet"], options].concat();
    let mut best = stillwell(folder, &arguments)?;
    for _ in 1..runs {
        let took = stillwell(folder, &arguments)?;
        best = Took { seconds: best.seconds.min(took.seconds), memory: best.memory.max(took.memory) };
    }
    Ok(best)
}

/// Writes a warehouse of so many series of so many weeks.
pub(crate) fn samples(folder: &Path, warehouse: &str, series: usize, weeks: usize) -> Outcome<Took> {
    let (series, weeks) = (series.to_string(), weeks.to_string());
    stillwell(folder, &["samples", warehouse, "--series", &series, "--weeks", &weeks])
}

/// A job that writes `rows` to Parquet.
fn job(warehouse: &str, rows: &str) -> String {
    format!(
        "CREATE EXTERNAL TABLE sales STORED AS PARQUET PARTITIONED BY (region) LOCATION '{warehouse}/sales/';
         COPY ({rows}) TO 'outlook/' STORED AS PARQUET PARTITIONED BY (region);"
    )
}

/// The forecast, with these drivers.
pub(crate) fn forecast(warehouse: &str, drivers: &str) -> String {
    job(
        warehouse,
        &format!(
        "SELECT * FROM forecast(
             data => (SELECT * FROM sales), per => (region, product), at => week, observed => units, {drivers}
             trend => 'local linear', season => 52, harmonics => 3, transform => 'log', horizon => {HORIZON})"
    ),
    )
}

/// As many rows as the forecast has and as many columns, from the same rows in the same order, without a fit: read,
/// spread over the threads, sorted, counted off, written.
pub(crate) fn without_fit(warehouse: &str) -> String {
    job(warehouse, &format!(
        "SELECT region, product, week AS at, n AS step, units AS expected, units AS std_error, units AS lower, units AS upper,
                units AS total_expected, units AS total_lower, units AS total_upper, 'ok' AS status
         FROM (SELECT region, product, week, units, row_number() OVER (PARTITION BY region, product ORDER BY week) AS n
               FROM sales)
         WHERE n <= {HORIZON}"
    ))
}
