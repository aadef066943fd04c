//! Metrics, memory, cancellation, concurrency of the operator.

use std::sync::Arc;
use std::time::Duration;

use arrow::util::pretty::pretty_format_batches;
use datafusion::execution::memory_pool::GreedyMemoryPool;
use datafusion::execution::runtime_env::RuntimeEnvBuilder;
use datafusion::prelude::{SessionConfig, SessionContext};
use futures::StreamExt;

use crate::support::*;

const CALL: &str = "components(data => sales, per => (region, product), at => week, observed => units,
                    trend => 'local level', season => 4)";

#[tokio::test]
async fn explain_analyze_shows_what_the_fits_took() {
    let context = session();
    let batch = rows(&context, &format!("EXPLAIN ANALYZE SELECT * FROM {CALL}")).await;
    let plan = pretty_format_batches(&[batch]).unwrap().to_string();
    let line = plan.lines().find(|line| line.contains("ComponentsExec")).unwrap();
    for metric in [
        "output_rows=360",
        "output_batches=1",
        "series_fitted=6",
        "series_in_trouble=0",
        "likelihood_evaluations=",
        "time_in_fits=",
    ] {
        assert!(line.contains(metric), "no {metric} in {line}");
    }
}

#[tokio::test]
async fn memory_is_accounted_and_given_back() {
    let pool = Arc::new(GreedyMemoryPool::new(64 << 20));
    let runtime = RuntimeEnvBuilder::new().with_memory_pool(Arc::clone(&pool) as _).build_arc().unwrap();
    let context = SessionContext::new_with_config_rt(SessionConfig::new().with_target_partitions(2), runtime);
    stillwell::register(&context).unwrap();
    add_table(&context, "sales", vec![vec![sales(60)]]);
    rows(&context, &format!("SELECT * FROM {CALL}")).await;
    assert_eq!(datafusion::execution::memory_pool::MemoryPool::reserved(pool.as_ref()), 0);
}

#[tokio::test]
async fn a_series_beyond_the_memory_limit_is_an_error_of_the_pool() {
    let pool = Arc::new(GreedyMemoryPool::new(200_000));
    let runtime = RuntimeEnvBuilder::new().with_memory_pool(pool).build_arc().unwrap();
    let config = SessionConfig::new().with_target_partitions(1).with_sort_spill_reservation_bytes(0);
    let context = SessionContext::new_with_config_rt(config, runtime);
    stillwell::register(&context).unwrap();
    // Sorted already, so that only the operator needs memory.
    let sql = "SELECT * FROM components(data => (SELECT value AS t, 1.0 + value % 7 AS y FROM generate_series(1, 40000)),
               at => t, observed => y, trend => 'local level', season => 0)";
    let message = error(&context, sql).await;
    assert!(message.contains("Resources exhausted"), "{message}");
}

#[tokio::test]
async fn a_grid_far_longer_than_its_rows_is_accounted_too() {
    let pool = Arc::new(GreedyMemoryPool::new(50 << 20));
    let runtime = RuntimeEnvBuilder::new().with_memory_pool(pool).build_arc().unwrap();
    let context = SessionContext::new_with_config_rt(SessionConfig::new().with_target_partitions(1), runtime);
    stillwell::register(&context).unwrap();
    let sql = "SELECT * FROM components(data => (SELECT value * value AS t, 1.0 + value % 7 AS y FROM generate_series(1, 900)),
               at => t, observed => y, every => 1, trend => 'local level', season => 0)";
    let message = error(&context, sql).await;
    assert!(message.contains("Resources exhausted"), "{message}");
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn dropping_the_stream_stops_the_work() {
    let progress = Arc::new(stillwell::Progress::default());
    let config = SessionConfig::new()
        .with_target_partitions(2)
        .with_batch_size(16)
        .with_extension(Arc::clone(&progress));
    let context = SessionContext::new_with_config(config);
    stillwell::register(&context).unwrap();
    let sql = "SELECT * FROM components(
                   data => (SELECT value % 3000 AS k, value / 3000 AS t, 10.0 + value % 11 + value % 7 AS y
                            FROM generate_series(0, 119999)),
                   per => k, at => t, observed => y, trend => 'local level', season => 0)";
    let mut stream = context.sql(sql).await.unwrap().execute_stream().await.unwrap();
    stream.next().await.unwrap().unwrap();
    drop(stream);
    // A worker ends after the series in hand; on a busy machine the news may take a while to reach it.
    let mut done = 0;
    while progress.series() != done {
        done = progress.series();
        tokio::time::sleep(Duration::from_millis(500)).await;
    }
    assert!((1..1500).contains(&done), "{done} of 3000 series were fitted");
}
