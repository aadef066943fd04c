//! Fitting under a memory limit that the rows do not fit in: the sort, or the aggregation, goes to disk, the answer stays the same.

use std::sync::Arc;

use arrow::array::RecordBatch;
use datafusion::execution::disk_manager::{DiskManagerBuilder, DiskManagerMode};
use datafusion::execution::memory_pool::FairSpillPool;
use datafusion::execution::runtime_env::RuntimeEnvBuilder;
use datafusion::physical_plan::aggregates::AggregateExec;
use datafusion::physical_plan::sorts::sort::SortExec;
use datafusion::physical_plan::{ExecutionPlan, collect};
use datafusion::prelude::{SessionConfig, SessionContext};

/// 1,000 depots with long names, 120 days each, in an order that has nothing to do with either: some 10 MB to sort.
const DATA: &str = "(SELECT 'depot ' || lpad(CAST(k AS VARCHAR), 4, '0') || ' of the Ostrel Creameries in ' || repeat('Coldwater ', 3) AS depot,
            t, 100.0 + t * 0.1 + ((t * t * 37 + k * k * 19 + k * t) % 211 - 105) / 52.5 AS litres
     FROM (SELECT value * 7919 % 120000 % 1000 AS k, value * 7919 % 120000 / 1000 AS t FROM generate_series(0, 119999)))";

/// A call in FROM, its rows in order.
fn call(function: &str, more: &str, order: &str) -> String {
    format!(
        "SELECT * FROM {function}(data => {DATA}, per => depot, at => t, observed => litres, trend => 'local level',
             season => 0, transform => 'none', known => {{'irregular': 2.0, 'level': 0.5}}{more}) ORDER BY {order}"
    )
}

fn window() -> String {
    format!(
        "SELECT depot, t, s['level'] AS level, s['outlier_t'] AS outlier_t
         FROM (SELECT depot, t, structural_components(t, litres, {{'trend': 'local level', 'season': 0, 'transform': 'none',
                   'known': {{'irregular': 2.0, 'level': 0.5}}}}) OVER (PARTITION BY depot ORDER BY t) AS s FROM {DATA})
         ORDER BY depot, t"
    )
}

/// The one with matrices has no structure to name.
fn state_space() -> String {
    format!(
        "SELECT * FROM state_space(data => {DATA}, per => depot, at => t, observed => litres,
             z => [1.0], t => [1.0], h => 2.0, q => [0.5]) ORDER BY depot, at"
    )
}

fn fits() -> String {
    format!(
        "SELECT depot, structural_fit(t, litres, {{'trend': 'local level', 'season': 0, 'transform': 'none',
             'known': {{'irregular': 2.0, 'level': 0.5}}}}) AS fit FROM {DATA} GROUP BY depot ORDER BY depot"
    )
}

/// The rows, and how often the operators of the plan that hold the series went to disk.
async fn answer(sql: &str, partitions: usize, memory: Option<usize>) -> (RecordBatch, usize) {
    let mut runtime = RuntimeEnvBuilder::new()
        .with_disk_manager_builder(DiskManagerBuilder::default().with_mode(DiskManagerMode::OsTmpDirectory));
    if let Some(memory) = memory {
        runtime = runtime.with_memory_pool(Arc::new(FairSpillPool::new(memory)));
    }
    // Short batches: what the merge of the spilled files holds at once must leave room for the fits.
    let config = SessionConfig::new()
        .with_target_partitions(partitions)
        .with_batch_size(1_024)
        .with_sort_spill_reservation_bytes(1 << 20);
    let context = SessionContext::new_with_config_rt(config, runtime.build_arc().expect("a runtime"));
    stillwell::register(&context).expect("a plain session takes the functions");
    let plan = context.sql(sql).await.expect("a good query").create_physical_plan().await.expect("a plan");
    let batches = collect(Arc::clone(&plan), context.task_ctx()).await.expect("enough memory to go to disk");
    let rows = arrow::compute::concat_batches(&plan.schema(), &batches).expect("one schema");
    (rows, spills(&plan))
}

/// Spilled files of the operators that hold the series: aggregations, or in a plan without one the sorts.
fn spills(plan: &Arc<dyn ExecutionPlan>) -> usize {
    let aggregations = spills_of(plan, &|plan| plan.downcast_ref::<AggregateExec>().is_some());
    aggregations.unwrap_or_else(|| {
        spills_of(plan, &|plan| plan.downcast_ref::<SortExec>().is_some()).unwrap_or_default()
    })
}

/// Spilled files of the operators of one kind; nothing where there is none.
fn spills_of(plan: &Arc<dyn ExecutionPlan>, kind: &dyn Fn(&dyn ExecutionPlan) -> bool) -> Option<usize> {
    let spilled = || plan.metrics().and_then(|metrics| metrics.spill_count()).unwrap_or(0);
    let own = kind(plan.as_ref()).then(spilled);
    let below = plan.children().into_iter().filter_map(|child| spills_of(child, kind));
    own.into_iter().chain(below).reduce(|a, b| a + b)
}

/// Partitions and bytes. Each partition sorts and merges on its own; in two of them the same rows need more room.
const ONE: (usize, usize) = (1, 6 << 20);
const TWO: (usize, usize) = (2, 16 << 20);

/// Holds the answers under limits against the one without.
async fn disk_changes_no_bit(sql: &str, rows: usize, limits: &[(usize, usize)]) {
    let (expected, without) = answer(sql, 1, None).await;
    assert_eq!((expected.num_rows(), without), (rows, 0));
    for &(partitions, memory) in limits {
        let (found, spilled) = answer(sql, partitions, Some(memory)).await;
        assert!(spilled > 0, "{partitions}: all rows fit into memory: this shows nothing");
        // Arrow compares floating-point values bit by bit.
        assert!(found == expected, "{partitions} partitions: {sql}");
    }
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn components_from_disk() {
    disk_changes_no_bit(&call("components", "", "depot, at"), 120_000, &[ONE, TWO]).await;
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn forecast_from_disk() {
    disk_changes_no_bit(&call("forecast", ", horizon => 3", "depot, step"), 3_000, &[ONE, TWO]).await;
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn diagnostics_from_disk() {
    disk_changes_no_bit(&call("diagnostics", "", "depot"), 1_000, &[ONE, TWO]).await;
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn structural_components_from_disk() {
    // The engine hands the result of a partition on as one batch, which a merge of two holds twice.
    disk_changes_no_bit(&window(), 120_000, &[ONE]).await;
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn state_space_from_disk() {
    disk_changes_no_bit(&state_space(), 120_000, &[ONE, TWO]).await;
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn structural_fit_from_disk() {
    // Rows as numbers take less room than rows to sort: some 4 MB, and the fits are small.
    disk_changes_no_bit(&fits(), 1_000, &[(1, 3 << 20), (2, 6 << 20)]).await;
}
