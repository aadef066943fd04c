//! A nightly job: a folder of Parquet files in, the outlook of every series out as Parquet.
//!
//! `cargo run -p stillwell --example outlook` writes a few sales of the Ostrel Creameries into a temporary
//! folder first, so that there is something to read; a real job starts at `register_parquet`.

use std::sync::Arc;

use datafusion::dataframe::DataFrameWriteOptions;
use datafusion::error::Result;
use datafusion::prelude::{ParquetReadOptions, SessionConfig, SessionContext};

#[tokio::main]
async fn main() -> Result<()> {
    let folder = tempfile::tempdir()?;
    // A path that ends in a slash is a folder.
    let sales = format!("{}/sales/", folder.path().display());
    let outlook = format!("{}/outlook/", folder.path().display());

    // The functions go into an ordinary session; Progress is optional.
    let progress = Arc::new(stillwell::Progress::default());
    let config = SessionConfig::new().with_extension(Arc::clone(&progress));
    let context = SessionContext::new_with_config(config);
    stillwell::register(&context)?;

    write_sales(&context, &sales).await?;
    context.register_parquet("sales", &sales, ParquetReadOptions::default()).await?;

    let forecast = context
        .sql(
            "SELECT depot, at, step, expected, lower, upper, total_expected, status
             FROM forecast(
                 data     => (SELECT depot, week, litres FROM sales),
                 per      => depot,
                 at       => week,
                 observed => litres,
                 horizon  => 4)
             ORDER BY depot, step",
        )
        .await?;
    forecast.clone().write_parquet(&outlook, DataFrameWriteOptions::new(), None).await?;

    context.read_parquet(&outlook, ParquetReadOptions::default()).await?.show().await?;
    for troubled in progress.troubled() {
        eprintln!("{}: {}", troubled.series, troubled.message);
    }
    Ok(())
}

/// Two depots over 60 weeks from 2 January 2023, day 19359: a rising level, a wave of four weeks, and a little unrest.
async fn write_sales(context: &SessionContext, folder: &str) -> Result<()> {
    let sales = context
        .sql(
            "SELECT depot,
                    CAST(CAST(19359 + 7 * n AS INT) AS DATE) AS week,
                    base + 0.8 * n + 12 * sin(n * pi() / 2) + (n * n) % 7 AS litres
             FROM generate_series(0, 59) AS weeks(n),
                  (VALUES ('Lower Quay', 240.0), ('Mill Street', 310.0)) AS depots(depot, base)",
        )
        .await?;
    sales.write_parquet(folder, DataFrameWriteOptions::new(), None).await?;
    Ok(())
}
