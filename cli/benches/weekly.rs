//! The whole command over a warehouse of weekly series: reading Parquet, sorting, fitting, writing Parquet.
//!
//!     cargo bench -p stillwell-cli --bench weekly
//!
//! Writes 2,000 series of 156 weeks to a temporary folder (`stillwell samples`), then times three jobs on it, each several
//! times: one that reads, spreads, sorts and writes as a forecast does but fits nothing; the forecast of 13 weeks with a local
//! linear trend and three harmonics of 52 weeks; and the same with price, promotion and holiday. The best time counts: what
//! else the machine does only ever adds. `STILLWELL_BENCH_SERIES`, `STILLWELL_BENCH_WEEKS` and `STILLWELL_BENCH_RUNS` change
//! the size.

use std::env;
use std::error::Error;
use std::fs;
use std::path::Path;
use std::process::{Command, Stdio};
use std::thread::available_parallelism;
use std::time::{Duration, Instant};

type Outcome<T> = Result<T, Box<dyn Error>>;

const COMMAND: &str = env!("CARGO_BIN_EXE_stillwell");

/// Steps that are forecast.
const HORIZON: usize = 13;

/// A size from the environment.
fn size(name: &str, usual: usize) -> Outcome<usize> {
    match env::var(name) {
        Ok(text) => text.parse().map_err(|_| format!("{name} is '{text}'; it takes a whole number").into()),
        Err(_) => Ok(usual),
    }
}

/// Runs the command in a folder; it must succeed.
fn stillwell(folder: &Path, arguments: &[&str]) -> Outcome<Duration> {
    let begin = Instant::now();
    let output = Command::new(COMMAND).args(arguments).current_dir(folder).stdin(Stdio::null()).output()?;
    let took = begin.elapsed();
    if output.status.success() {
        return Ok(took);
    }
    Err(format!("stillwell {}: {}", arguments.join(" "), String::from_utf8_lossy(&output.stderr)).into())
}

/// A job that writes `rows` to Parquet.
fn job(rows: &str) -> String {
    format!(
        "CREATE EXTERNAL TABLE sales STORED AS PARQUET PARTITIONED BY (region) LOCATION 'warehouse/sales/';
         COPY ({rows}) TO 'outlook/' STORED AS PARQUET PARTITIONED BY (region);"
    )
}

/// The forecast, with these drivers.
fn forecast(drivers: &str) -> String {
    job(&format!(
        "SELECT * FROM forecast(
             data => (SELECT * FROM sales), per => (region, product), at => week, observed => units, {drivers}
             trend => 'local linear', season => 52, harmonics => 3, transform => 'log', horizon => {HORIZON})"
    ))
}

/// As many rows as the forecast has and as many columns, from the same rows in the same order, without a fit.
fn without_fit() -> String {
    job(&format!(
        "SELECT region, product, week AS at, n AS step, units AS expected, units AS std_error, units AS lower, units AS upper,
                total AS total_expected, total AS total_lower, total AS total_upper, 'ok' AS status
         FROM (SELECT region, product, week, units, row_number() OVER (PARTITION BY region, product ORDER BY week) AS n,
                      sum(units) OVER (PARTITION BY region, product ORDER BY week) AS total
               FROM sales)
         WHERE n <= {HORIZON}"
    ))
}

/// The best time of a job.
fn best(folder: &Path, name: &str, sql: &str, runs: usize) -> Outcome<Duration> {
    let file = format!("{name}.sql");
    fs::write(folder.join(&file), sql)?;
    let times = (0..runs.max(1))
        .map(|_| stillwell(folder, &["run", &file, "--quiet"]))
        .collect::<Outcome<Vec<_>>>()?;
    times.into_iter().min().ok_or_else(|| "no run".into())
}

fn main() -> Outcome<()> {
    let series = size("STILLWELL_BENCH_SERIES", 2_000)?;
    let weeks = size("STILLWELL_BENCH_WEEKS", 156)?;
    let runs = size("STILLWELL_BENCH_RUNS", 5)?;
    let folder = tempfile::tempdir()?;
    let (n, w) = (series.to_string(), weeks.to_string());
    stillwell(folder.path(), &["samples", "warehouse", "--series", &n, "--weeks", &w])?;
    let threads = available_parallelism()?;
    println!(
        "{series} series of {weeks} weeks, {HORIZON} weeks ahead, {threads} threads, best of {runs} runs\n"
    );
    println!("{:34} {:>9} {:>12} {:>12} {:>9}", "job", "seconds", "series/s", "ms/series", "ratio");
    let jobs = [
        ("read, sort, write: no fit", "without_fit", without_fit()),
        ("forecast", "forecast", forecast("")),
        ("forecast with three drivers", "with_drivers", forecast("drivers => (price, promo, holiday),")),
    ];
    let mut base = None;
    for (words, name, sql) in jobs {
        let seconds = best(folder.path(), name, &sql, runs)?.as_secs_f64();
        let base = *base.get_or_insert(seconds);
        println!(
            "{words:34} {seconds:9.3} {:12.0} {:12.3} {:9.1}",
            series as f64 / seconds,
            1e3 * seconds / series as f64,
            seconds / base
        );
    }
    Ok(())
}
