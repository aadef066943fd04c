//! The whole job on a large warehouse: time against the same query without fits, threads, size, memory.
//!
//!     cargo bench -p stillwell-cli --bench warehouse
//!
//! Writes 100,000 series of 156 weeks (15.6 million rows and the plan) to a temporary folder, once as `stillwell samples`
//! does, and forecasts 13 weeks of each to Parquet. `STILLWELL_BENCH_SERIES`, `STILLWELL_BENCH_WEEKS`, `STILLWELL_BENCH_RUNS`
//! (2; the best time and the most memory count) and `STILLWELL_BENCH_FOLDER` (where to work) change that; a million series is
//! `STILLWELL_BENCH_SERIES=1000000`.
//!
//! The files of the warehouse say that they are sorted by product and week, which saves the forecast its sort. The jobs
//! named "unsorted" are run with the engine told not to look at what files say of themselves.

mod common;

use std::env;
use std::path::Path;
use std::thread::available_parallelism;

use common::{HORIZON, Outcome, Took, best, forecast, samples, size, without_fit};

/// Has the engine pass over the order that files are said to have.
const UNSORTED: [&str; 2] = ["--set", "datafusion.execution.collect_statistics=false"];

/// The limit of memory that the job must get by with.
const LIMIT: [&str; 2] = ["--memory-limit", "256MB"];

fn print(words: &str, series: usize, took: Took, base: f64) {
    println!(
        "{words:44} {:9.2} {:10.0} {:10.1} {:7.2} {:7.0}",
        took.seconds,
        series as f64 / took.seconds,
        1e6 * took.seconds / series as f64,
        took.seconds / base,
        took.memory.unwrap_or(0) as f64 / 1e6
    );
}

/// The jobs on the large warehouse; gives the time of the forecast on all threads.
fn jobs(folder: &Path, warehouse: &str, series: usize, runs: usize, threads: usize) -> Outcome<f64> {
    let (plain, fits) = (without_fit(warehouse), forecast(warehouse, ""));
    let base = best(folder, "without_fit", &plain, &[], runs)?;
    print("read, sort, write: no fit", series, base, base.seconds);
    let whole = best(folder, "forecast", &fits, &[], runs)?;
    print("forecast", series, whole, base.seconds);
    if threads > 1 {
        let one = best(folder, "forecast", &fits, &["--threads", "1"], runs)?;
        print("forecast, --threads 1", series, one, base.seconds);
        let two = best(folder, "forecast", &fits, &["--threads", "2"], runs)?;
        print("forecast, --threads 2", series, two, base.seconds);
        println!("    two threads are {:.2} times as fast as one", one.seconds / two.seconds);
    }
    let limited = best(folder, "forecast", &fits, &LIMIT, 1)?;
    print("forecast, --memory-limit 256MB", series, limited, base.seconds);
    let unsorted = best(folder, "forecast", &fits, &UNSORTED, 1)?;
    print("forecast, unsorted", series, unsorted, base.seconds);
    let spilled = best(folder, "forecast", &fits, &[UNSORTED, LIMIT].concat(), 1)?;
    print("forecast, unsorted, --memory-limit 256MB", series, spilled, base.seconds);
    Ok(whole.seconds)
}

/// The cost of a series in warehouses of several sizes, less what the command takes to start.
fn sizes(folder: &Path, series: usize, weeks: usize, runs: usize, largest: f64) -> Outcome<()> {
    let start = best(folder, "nothing", "SELECT 1;", &[], runs.max(3))?.seconds;
    println!("\nmicroseconds a series, without the {start:.2} s that the command takes to start and end");
    for (count, name) in [(1_000, "of_1000"), (10_000, "of_10000")] {
        if count < series {
            samples(folder, name, count, weeks)?;
            let took = best(folder, name, &forecast(name, ""), &[], runs.max(3))?;
            println!("{count:10} {:8.1}", 1e6 * (took.seconds - start) / count as f64);
        }
    }
    println!("{series:10} {:8.1}", 1e6 * (largest - start) / series as f64);
    Ok(())
}

fn main() -> Outcome<()> {
    let series = size("STILLWELL_BENCH_SERIES", 100_000)?;
    let weeks = size("STILLWELL_BENCH_WEEKS", 156)?;
    let runs = size("STILLWELL_BENCH_RUNS", 2)?;
    let folder = match env::var_os("STILLWELL_BENCH_FOLDER") {
        Some(place) => tempfile::tempdir_in(place)?,
        None => tempfile::tempdir()?,
    };
    let threads = available_parallelism()?.get();
    let written = samples(folder.path(), "warehouse", series, weeks)?;
    println!(
        "{series} series of {weeks} weeks, written in {:.1} s with {:.0} MB; {HORIZON} weeks ahead, {threads} threads, best of {runs} runs\n",
        written.seconds,
        written.memory.unwrap_or(0) as f64 / 1e6
    );
    println!(
        "{:44} {:>9} {:>10} {:>10} {:>7} {:>7}",
        "job", "seconds", "series/s", "us/series", "ratio", "MB"
    );
    let largest = jobs(folder.path(), "warehouse", series, runs, threads)?;
    sizes(folder.path(), series, weeks, runs, largest)
}
