//! The same bits whatever the number of partitions, the size of batches and the order of rows.

use arrow::array::RecordBatch;
use datafusion::prelude::{SessionConfig, SessionContext};

use crate::support::*;

const CALLS: [(&str, &str); 3] = [
    ("components", "ORDER BY region, product, at"),
    ("forecast", "ORDER BY region, product, step"),
    ("diagnostics", "ORDER BY region, product"),
];

async fn answer(context: &SessionContext, (function, order): (&str, &str)) -> Vec<String> {
    let horizon = if function == "forecast" { ", horizon => 4" } else { "" };
    let sql = format!(
        "SELECT * FROM {function}(data => sales, per => (region, product), at => week, observed => units,
         season => 4 {horizon}) {order}"
    );
    bits(&rows(context, &sql).await)
}

fn split(batch: &RecordBatch, partitions: usize) -> Vec<Vec<RecordBatch>> {
    let size = batch.num_rows().div_ceil(partitions);
    (0..partitions)
        .map(|at| {
            let start = at * size;
            vec![batch.slice(start, size.min(batch.num_rows() - start))]
        })
        .collect()
}

#[tokio::test]
async fn partitions_batches_and_order_change_nothing() {
    let table = sales(48);
    for call in CALLS {
        let expected =
            answer(&session_over(table.clone(), SessionConfig::new().with_target_partitions(1)), call).await;
        for (partitions, batch_size, seed) in [(1, 16, 1), (2, 8_192, 2), (8, 32, 3), (8, 8_192, 4)] {
            let config = SessionConfig::new().with_target_partitions(partitions).with_batch_size(batch_size);
            let context = SessionContext::new_with_config(config);
            stillwell::register(&context).unwrap();
            add_table(&context, "sales", split(&shuffled(&table, seed), partitions));
            assert_eq!(answer(&context, call).await, expected, "{call:?} {partitions} {batch_size}");
        }
    }
}
