//! The whole command over a warehouse of weekly series: reading Parquet, fitting, writing Parquet.
//!
//!     cargo bench -p stillwell-cli --bench weekly
//!
//! Writes 2,000 series of 156 weeks to a temporary folder (`stillwell samples`), then times three jobs on it, each several
//! times: one that reads, spreads, sorts and writes as many rows as a forecast does but fits nothing; the forecast of 13
//! weeks with a local linear trend and three harmonics of 52 weeks; and the same with price, promotion and holiday. The best
//! time counts. `STILLWELL_BENCH_SERIES`, `STILLWELL_BENCH_WEEKS` and `STILLWELL_BENCH_RUNS` change the size. The figures of a
//! large warehouse are the bench `warehouse`'s.

mod common;

use std::thread::available_parallelism;

use common::{HORIZON, Outcome, best, forecast, samples, size, without_fit};

fn main() -> Outcome<()> {
    let series = size("STILLWELL_BENCH_SERIES", 2_000)?;
    let weeks = size("STILLWELL_BENCH_WEEKS", 156)?;
    let runs = size("STILLWELL_BENCH_RUNS", 5)?;
    let folder = tempfile::tempdir()?;
    samples(folder.path(), "warehouse", series, weeks)?;
    let threads = available_parallelism()?;
    println!(
        "{series} series of {weeks} weeks, {HORIZON} weeks ahead, {threads} threads, best of {runs} runs\n"
    );
    println!(
        "{:34} {:>9} {:>12} {:>12} {:>9} {:>9}",
        "job", "seconds", "series/s", "ms/series", "ratio", "MB"
    );
    let jobs = [
        ("read, sort, write: no fit", "without_fit", without_fit("warehouse")),
        ("forecast", "forecast", forecast("warehouse", "")),
        (
            "forecast with three drivers",
            "with_drivers",
            forecast("warehouse", "drivers => (price, promo, holiday),"),
        ),
    ];
    let mut base = None;
    for (words, name, sql) in jobs {
        let took = best(folder.path(), name, &sql, &[], runs)?;
        let base = *base.get_or_insert(took.seconds);
        println!(
            "{words:34} {:9.3} {:12.0} {:12.3} {:9.1} {:9.0}",
            took.seconds,
            series as f64 / took.seconds,
            1e3 * took.seconds / series as f64,
            took.seconds / base,
            took.memory.unwrap_or(0) as f64 / 1e6
        );
    }
    Ok(())
}
