//! Which files are read as they lie, which are sorted, and that both give the same.

use std::fs::{self, File};
use std::path::Path;

use datafusion::arrow::array::{ArrayRef, Float64Array, Int64Array, RecordBatch, StringArray};
use datafusion::arrow::util::pretty::pretty_format_batches;
use datafusion::parquet::arrow::ArrowWriter;
use datafusion::parquet::file::metadata::SortingColumn;
use datafusion::parquet::file::properties::WriterProperties;
use datafusion::prelude::{SessionConfig, SessionContext};

use super::*;

/// One row: product, week, units.
type Row = (Option<&'static str>, i64, f64);

fn weeks(product: &'static str) -> Vec<Row> {
    (0..30).map(|week| (Some(product), week, ((week * 7) % 11) as f64)).collect()
}

/// Writes a file; `sorted`: its metadata says that it is sorted by product and week.
fn write(path: &Path, rows: &[Row], sorted: bool) {
    fs::create_dir_all(path.parent().unwrap()).unwrap();
    let columns: [(&str, ArrayRef, bool); 3] = [
        ("product", Arc::new(rows.iter().map(|row| row.0).collect::<StringArray>()), true),
        ("week", Arc::new(rows.iter().map(|row| row.1).collect::<Int64Array>()), true),
        ("units", Arc::new(rows.iter().map(|row| row.2).collect::<Float64Array>()), true),
    ];
    let batch = RecordBatch::try_from_iter_with_nullable(columns).unwrap();
    let sorting =
        [0, 1].map(|column_idx| SortingColumn { column_idx, descending: false, nulls_first: false });
    let properties =
        WriterProperties::builder().set_sorting_columns(sorted.then(|| sorting.to_vec())).build();
    let mut writer =
        ArrowWriter::try_new(File::create(path).unwrap(), batch.schema(), Some(properties)).unwrap();
    writer.write(&batch).unwrap();
    writer.close().unwrap();
}

async fn session(folder: &Path, how: &str) -> SessionContext {
    session_with(folder, "", how).await
}

async fn session_with(folder: &Path, columns: &str, how: &str) -> SessionContext {
    let context = SessionContext::new_with_config(SessionConfig::new().with_target_partitions(4));
    crate::register(&context).unwrap();
    let place = folder.display();
    context
        .sql(&format!("CREATE EXTERNAL TABLE sales {columns} STORED AS PARQUET {how} LOCATION '{place}/'"))
        .await
        .unwrap();
    context
}

fn call(data: &str, per: &str) -> String {
    format!(
        "SELECT * FROM forecast(data => ({data}), per => {per}, at => week, observed => units, trend => 'local level',
         season => 0, transform => 'none', horizon => 2)"
    )
}

async fn rows(context: &SessionContext, sql: &str) -> Result<String, String> {
    let batches = context.sql(sql).await.unwrap().collect().await.map_err(|error| error.to_string())?;
    Ok(pretty_format_batches(&batches).unwrap().to_string())
}

async fn is_sorted_again(context: &SessionContext, sql: &str) -> bool {
    let plan = rows(context, &format!("EXPLAIN {sql}")).await.unwrap();
    let is_sorted = plan.contains("SortExec");
    assert!(is_sorted || !plan.contains("partitioning=Hash"), "{plan}");
    is_sorted
}

/// The rows of the same call over the same data in memory, where nothing is known of its order.
async fn expected(context: &SessionContext, data: &str, per: &str) -> String {
    context.sql(&format!("CREATE OR REPLACE TABLE copied AS {data}")).await.unwrap();
    let sql = call("SELECT * FROM copied", per);
    rows(context, &format!("{sql} ORDER BY {}, at", per.trim_matches(['(', ')']))).await.unwrap()
}

/// One sorted file in each of two folders.
fn two_regions(folder: &Path, sorted: bool) {
    for (region, products) in [("north", ["ale", "bun"]), ("east", ["ale", "cod"])] {
        let rows = products.into_iter().flat_map(weeks).collect::<Vec<_>>();
        write(&folder.join(format!("region={region}/part.parquet")), &rows, sorted);
    }
}

#[tokio::test]
async fn sorted_files_of_folders_are_read_one_after_the_other() {
    let folder = tempfile::tempdir().unwrap();
    two_regions(folder.path(), true);
    let context = session(folder.path(), "PARTITIONED BY (region)").await;
    let (data, per) = ("SELECT * FROM sales", "(region, product)");
    let sql = call(data, per);
    assert!(!is_sorted_again(&context, &sql).await);
    let got = rows(&context, &sql).await.unwrap();
    assert_eq!(got, expected(&context, data, per).await, "in the order of the keys too");
    assert!(got.find("east") < got.find("north"));
    // The other order of the keys is another order of the rows.
    assert!(is_sorted_again(&context, &call(data, "(product, region)")).await);
    // A product of two regions is no series of one file.
    assert!(is_sorted_again(&context, &call("SELECT * FROM sales", "product")).await);
    let computed = "SELECT region, product, week, units + 1 AS units FROM sales";
    assert!(!is_sorted_again(&context, &call(computed, per)).await);
    assert_eq!(rows(&context, &call(computed, per)).await.unwrap(), expected(&context, computed, per).await);
}

#[tokio::test]
async fn a_condition_on_the_rows_keeps_their_order() {
    let folder = tempfile::tempdir().unwrap();
    two_regions(folder.path(), true);
    let context = session(folder.path(), "PARTITIONED BY (region)").await;
    let (data, per) = ("SELECT * FROM sales WHERE units < 10", "(region, product)");
    assert!(!is_sorted_again(&context, &call(data, per)).await);
    assert_eq!(rows(&context, &call(data, per)).await.unwrap(), expected(&context, data, per).await);
    let limited = "SELECT * FROM sales LIMIT 70";
    assert!(is_sorted_again(&context, &call(limited, per)).await, "a limit may take any rows");
}

#[tokio::test]
async fn files_that_say_nothing_are_sorted() {
    let folder = tempfile::tempdir().unwrap();
    two_regions(folder.path(), false);
    let context = session(folder.path(), "PARTITIONED BY (region)").await;
    let sql = call("SELECT * FROM sales", "(region, product)");
    assert!(is_sorted_again(&context, &sql).await);
    let declared = session(folder.path(), "PARTITIONED BY (region) WITH ORDER (product, week)").await;
    assert!(!is_sorted_again(&declared, &sql).await, "the table says it for them");
    let columns = "(product VARCHAR, week BIGINT, units DOUBLE, region VARCHAR)";
    let how = "PARTITIONED BY (region) WITH ORDER (region, product, week)";
    let declared = session_with(folder.path(), columns, how).await;
    assert!(!is_sorted_again(&declared, &sql).await);
}

#[tokio::test]
async fn files_with_ranges_of_keys_are_read_in_their_order() {
    let folder = tempfile::tempdir().unwrap();
    write(&folder.path().join("1.parquet"), &weeks("cod"), true);
    write(&folder.path().join("2.parquet"), &[weeks("ale"), weeks("bun")].concat(), true);
    let context = session(folder.path(), "").await;
    let (data, per) = ("SELECT * FROM sales", "product");
    assert!(!is_sorted_again(&context, &call(data, per)).await);
    assert_eq!(rows(&context, &call(data, per)).await.unwrap(), expected(&context, data, per).await);
    write(&folder.path().join("3.parquet"), &weeks("ale"), true);
    let context = session(folder.path(), "").await;
    assert!(is_sorted_again(&context, &call(data, per)).await, "the third file lies within the second");
}

#[tokio::test]
async fn null_keys_at_the_end_of_a_file_are_not_overlooked() {
    let folder = tempfile::tempdir().unwrap();
    let nameless = weeks("").into_iter().map(|(_, week, units)| (None, week, units)).collect::<Vec<_>>();
    write(&folder.path().join("1.parquet"), &[weeks("ale"), nameless].concat(), true);
    let (data, per) = ("SELECT * FROM sales", "product");
    let context = session(folder.path(), "").await;
    assert!(!is_sorted_again(&context, &call(data, per)).await, "alone they stand where they belong");
    assert_eq!(rows(&context, &call(data, per)).await.unwrap(), expected(&context, data, per).await);
    write(&folder.path().join("2.parquet"), &weeks("bun"), true);
    let context = session(folder.path(), "").await;
    assert!(is_sorted_again(&context, &call(data, per)).await);
    assert_eq!(
        rows(&context, &format!("{} ORDER BY product, at", call(data, per))).await.unwrap(),
        expected(&context, data, per).await
    );
}

#[tokio::test]
async fn an_order_that_is_not_kept_is_an_error_with_a_remedy() {
    let folder = tempfile::tempdir().unwrap();
    write(&folder.path().join("1.parquet"), &[weeks("bun"), weeks("ale")].concat(), true);
    let context = session(folder.path(), "").await;
    let told = rows(&context, &call("SELECT * FROM sales", "product")).await.unwrap_err();
    assert!(told.contains("keys go back") && told.contains("sorting columns"), "{told}");
    let context = SessionContext::new();
    context.sql("SET datafusion.execution.collect_statistics = false").await.unwrap();
    crate::register(&context).unwrap();
    let place = folder.path().display();
    context.sql(&format!("CREATE EXTERNAL TABLE sales STORED AS PARQUET LOCATION '{place}/'")).await.unwrap();
    assert!(rows(&context, &call("SELECT * FROM sales", "product")).await.is_ok(), "the remedy");
}
