//! Fitting under a memory limit that the rows do not fit in: the sort goes to disk, the answer stays the same.

use std::sync::Arc;

use arrow::array::RecordBatch;
use datafusion::execution::disk_manager::{DiskManagerBuilder, DiskManagerMode};
use datafusion::execution::memory_pool::FairSpillPool;
use datafusion::execution::runtime_env::RuntimeEnvBuilder;
use datafusion::physical_plan::sorts::sort::SortExec;
use datafusion::physical_plan::{ExecutionPlan, collect};
use datafusion::prelude::{SessionConfig, SessionContext};

/// 1,000 depots with long names, 120 days each, in an order that has nothing to do with either: some 10 MB to sort.
const SQL: &str = "
    SELECT * FROM components(
        data => (SELECT 'depot ' || lpad(CAST(k AS VARCHAR), 4, '0') || ' of the Ostrel Creameries in ' || repeat('Coldwater ', 3) AS depot,
                        t, 100.0 + t * 0.1 + ((t * t * 37 + k * k * 19 + k * t) % 211 - 105) / 52.5 AS litres
                 FROM (SELECT value * 7919 % 120000 % 1000 AS k, value * 7919 % 120000 / 1000 AS t FROM generate_series(0, 119999))),
        per => depot, at => t, observed => litres,
        trend => 'local level', season => 0, transform => 'none', known => {'irregular': 2.0, 'level': 0.5})
    ORDER BY depot, at";

/// The rows, and how often the sorts of the plan went to disk.
async fn answer(memory: Option<usize>) -> (RecordBatch, usize) {
    let mut runtime = RuntimeEnvBuilder::new()
        .with_disk_manager_builder(DiskManagerBuilder::default().with_mode(DiskManagerMode::OsTmpDirectory));
    if let Some(memory) = memory {
        runtime = runtime.with_memory_pool(Arc::new(FairSpillPool::new(memory)));
    }
    // One partition and short batches: what the merge of the spilled files holds at once must leave room for the fits.
    let config = SessionConfig::new()
        .with_target_partitions(1)
        .with_batch_size(1_024)
        .with_sort_spill_reservation_bytes(1 << 20);
    let context = SessionContext::new_with_config_rt(config, runtime.build_arc().expect("a runtime"));
    stillwell::register(&context).expect("a plain session takes the functions");
    let plan = context.sql(SQL).await.expect("a good query").create_physical_plan().await.expect("a plan");
    let batches = collect(Arc::clone(&plan), context.task_ctx()).await.expect("enough memory to go to disk");
    let rows = arrow::compute::concat_batches(&plan.schema(), &batches).expect("one schema");
    (rows, spills(&plan))
}

/// Spilled files of the sorts in a plan.
fn spills(plan: &Arc<dyn ExecutionPlan>) -> usize {
    let own = match plan.downcast_ref::<SortExec>() {
        Some(sort) => sort.metrics().and_then(|metrics| metrics.spill_count()).unwrap_or(0),
        None => 0,
    };
    own + plan.children().into_iter().map(spills).sum::<usize>()
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn a_sort_on_disk_changes_no_bit() {
    let (expected, without) = answer(None).await;
    assert_eq!((expected.num_rows(), without), (120_000, 0));
    let (rows, spilled) = answer(Some(6 << 20)).await;
    assert!(spilled > 0, "all rows fit into memory: this shows nothing");
    // Arrow compares floating-point values bit by bit.
    assert!(rows == expected);
}
