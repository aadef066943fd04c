//! The nightly jobs of the demo: fits stored on Sunday, advanced on Monday from Monday's rows only.

use std::fs;
use std::path::Path;

use datafusion::prelude::SessionContext;

use crate::jobs::{Detour, run};
use crate::support::{ROOT, numbers, rows, session_over_files, texts};

pub(crate) const SUNDAY: &str = "parquet-samples/sunday_fits.sql";
pub(crate) const MONDAY: &str = "parquet-samples/monday_outlook.sql";

fn job(name: &str) -> String {
    fs::read_to_string(ROOT.join(name)).expect("a job of the demo")
}

async fn run_job(context: &SessionContext, sql: &str, folder: &Path) {
    let mut detour = Detour::default();
    detour.add(sql, folder);
    // Monday reads what Sunday wrote.
    detour.add(&job(SUNDAY), folder);
    if let Err(error) = run(context, sql, &detour).await {
        panic!("{error}\n{sql}");
    }
}

async fn count(context: &SessionContext, sql: &str) -> f64 {
    numbers(&rows(context, &format!("SELECT count(*) AS n FROM ({sql})")).await, "n")[0]
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn monday_needs_no_history_and_comes_to_the_same_place() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let at = |name: &str| folder.path().join("nightly").join(name).display().to_string();
    run_job(&session_over_files(), &job(SUNDAY), folder.path()).await;
    run_job(&session_over_files(), &job(MONDAY), folder.path()).await;

    let context = session_over_files();
    for name in ["sunday", "monday", "forecast"] {
        let sql = format!(
            "CREATE EXTERNAL TABLE {name} STORED AS PARQUET PARTITIONED BY (region) LOCATION '{}/'",
            at(name)
        );
        rows(&context, &sql).await;
    }
    // 48 series of which Hollow Blue in Saltmarsh never sold, 13 weeks each.
    assert_eq!(count(&context, "SELECT * FROM forecast").await, 48.0 * 13.0);
    let status = rows(
        &context,
        "SELECT status, count(*) AS n, min(product) AS product FROM forecast GROUP BY status ORDER BY status",
    )
    .await;
    assert_eq!(texts(&status, "status"), ["all missing", "no driver plan", "ok"]);
    assert_eq!(texts(&status, "product"), ["Hollow Blue", "Larch Whey", "Alder Butter"]);
    assert_eq!(numbers(&status, "n"), [13.0, 52.0, 43.0 * 13.0]);
    let advanced = "SELECT * FROM monday JOIN sunday ON monday.region = sunday.region AND monday.product = sunday.product
                    WHERE monday.fit['n'] = sunday.fit['n'] + 2 AND monday.fit['last_at'] = DATE '2025-12-22'
                      AND monday.fit['parameters'] = sunday.fit['parameters']";
    assert_eq!(count(&context, advanced).await, 43.0);

    // The same Monday in a warehouse that has forgotten everything before 15 December.
    let short = folder.path().join("short");
    let copy = format!(
        "COPY (SELECT * FROM 'parquet-samples/sales/' WHERE week >= DATE '2025-12-15') TO '{}/' STORED AS PARQUET PARTITIONED BY (region)",
        short.display()
    );
    rows(&context, &copy).await;
    let forgetful = job(MONDAY)
        .replace("'parquet-samples/sales/'", &format!("'{}/'", short.display()))
        .replace("nightly/monday/", "nightly/monday_short/")
        .replace("nightly/forecast/", "nightly/forecast_short/");
    run_job(&session_over_files(), &forgetful, folder.path()).await;
    // 48 fits, and 13 weeks of each.
    for (name, rows) in [("forecast", 48.0 * 13.0), ("monday", 48.0)] {
        let (whole, short) = (format!("'{}/'", at(name)), format!("'{}/'", at(&format!("{name}_short"))));
        same_rows(&context, &format!("SELECT * FROM {whole}"), &format!("SELECT * FROM {short}"), rows).await;
    }

    // Through Parquet bit for bit: the fits as they were made are those that were read back, every field of them, and foretell the same.
    let made =
        job(SUNDAY).split("COPY (").nth(1).and_then(|rest| rest.split(") TO").next()).map(str::to_string);
    let views = job(SUNDAY).split("-- The folder is replaced").next().map(str::to_string).expect("the views");
    let fresh = session_over_files();
    run_job(&fresh, &views, folder.path()).await;
    rows(&fresh, &format!("CREATE TABLE made AS {}", made.expect("the query of the job"))).await;
    for what in ["fit", "fit_forecast(fit, 13) AS steps"] {
        let made = format!("SELECT region, product, {what} FROM made");
        let read = format!("SELECT region, product, {what} FROM '{}/'", at("sunday"));
        same_rows(&fresh, &made, &read, 48.0).await;
    }
}

/// Both queries have this many rows, and the same ones.
async fn same_rows(context: &SessionContext, one: &str, other: &str, rows: f64) {
    assert_eq!(count(context, one).await, rows, "{one}");
    assert_eq!(count(context, other).await, rows, "{other}");
    for (a, b) in [(one, other), (other, one)] {
        assert_eq!(count(context, &format!("{a} EXCEPT {b}")).await, 0.0, "{a} EXCEPT {b}");
    }
}
