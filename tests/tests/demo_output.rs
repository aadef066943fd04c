//! The Parquet that the demo job writes: what another program finds in it.

use std::collections::BTreeSet;
use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use arrow::datatypes::{DataType, SchemaRef};
use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;
use parquet::basic::Type as Physical;

use crate::outlook::Outlook;
use crate::support::{number, rows, texts};

const RESULTS: [&str; 3] = ["components", "forecast", "diagnostics"];
/// 4 regions x 12 products.
const SERIES: f64 = 48.0;
/// Weeks that the job forecasts.
const HORIZON: f64 = 13.0;

/// All Parquet files below a folder, with the name of the folder each lies in.
fn files(folder: &Path) -> Vec<(String, PathBuf)> {
    let mut files = Vec::new();
    for entry in fs::read_dir(folder).expect("a folder that the job wrote") {
        let partition = entry.expect("an entry").path();
        let name = partition.file_name().and_then(|name| name.to_str()).expect("a plain name").to_string();
        assert!(partition.is_dir(), "{} is beside the partitions", partition.display());
        let inside = fs::read_dir(&partition).expect("a partition");
        files.extend(inside.map(|file| (name.clone(), file.expect("a file").path())));
    }
    files.sort();
    files
}

fn schema(file: &Path) -> SchemaRef {
    let file = File::open(file).expect("a file that the job wrote");
    Arc::clone(ParquetRecordBatchReaderBuilder::try_new(file).expect("Parquet").schema())
}

#[test]
fn each_region_has_its_folder_and_no_column() {
    for result in RESULTS {
        let files = files(&Outlook::get().result(result));
        let partitions = files.iter().map(|(partition, _)| partition.as_str()).collect::<BTreeSet<_>>();
        let expected = ["region=Coldwater", "region=Eastfell", "region=Marrowdale", "region=Saltmarsh"];
        assert_eq!(partitions, BTreeSet::from(expected), "{result}");
        for (_, file) in files {
            assert!(schema(&file).field_with_name("region").is_err(), "{}", file.display());
        }
    }
}

#[test]
fn columns_are_flat_and_of_plain_types() {
    for result in RESULTS {
        for (_, path) in files(&Outlook::get().result(result)) {
            let file = File::open(&path).expect("a file that the job wrote");
            let reader = ParquetRecordBatchReaderBuilder::try_new(file).expect("Parquet");
            let columns = reader.parquet_schema();
            assert_eq!(
                columns.num_columns(),
                reader.schema().fields().len(),
                "a nested column in {}",
                path.display()
            );
            for (column, field) in columns.columns().iter().zip(reader.schema().fields()) {
                let (physical, name) = (column.physical_type(), column.name());
                let fits = match field.data_type() {
                    DataType::Utf8 | DataType::LargeUtf8 | DataType::Utf8View => {
                        physical == Physical::BYTE_ARRAY
                    }
                    DataType::Date32 => physical == Physical::INT32,
                    DataType::Int64 => physical == Physical::INT64,
                    DataType::Float64 => physical == Physical::DOUBLE,
                    DataType::Boolean => physical == Physical::BOOLEAN,
                    _ => false,
                };
                assert!(fits, "{result}: {name} is {} as {physical}", field.data_type());
                assert_eq!((column.max_rep_level(), name), (0, field.name().as_str()));
            }
        }
    }
}

#[test]
fn every_file_of_a_result_has_the_same_columns() {
    for result in RESULTS {
        let files = files(&Outlook::get().result(result));
        let schemas = files.iter().map(|(_, file)| schema(file)).collect::<Vec<_>>();
        assert!(schemas.iter().all(|schema| schema == &schemas[0]), "{result}");
    }
}

#[test]
fn units_travel_with_the_columns() {
    let (_, file) = files(&Outlook::get().result("components")).swap_remove(0);
    let schema = schema(&file);
    let unit = |name: &str| schema.field_with_name(name).expect(name).metadata().get("unit").cloned();
    assert_eq!(unit("level").as_deref(), Some("data"));
    assert_eq!(unit("seasonal").as_deref(), Some("factor"));
    assert_eq!(unit("slope").as_deref(), Some("growth per step"));
    assert_eq!(unit("outlier_t").as_deref(), Some("t-value"));
    assert_eq!(unit("status"), None);
}

/// A future on a runtime of its own, after the job has run.
fn block<F: Future>(future: F) -> F::Output {
    let runtime = tokio::runtime::Builder::new_multi_thread().enable_all().build().expect("a runtime");
    runtime.block_on(future)
}

#[test]
fn everything_is_there_when_it_is_read_back() {
    let outlook = Outlook::get();
    block(async {
        let context = outlook.session().await;
        let count = async |sql: &str| number(&rows(&context, sql).await, "n");
        let series = "SELECT count(DISTINCT region || '/' || product) AS n FROM";
        for result in RESULTS {
            assert_eq!(count(&format!("{series} written_{result}")).await, SERIES, "{result}");
        }
        assert_eq!(count("SELECT count(*) AS n FROM written_diagnostics").await, SERIES);
        assert_eq!(count("SELECT count(*) AS n FROM written_forecast").await, SERIES * HORIZON);
        // From the first to the last week with a count, lost weeks included; and a series without any count as it came in.
        let weeks = count(
            "SELECT sum(CASE WHEN sold = 0 THEN listed ELSE (last - first) / 7 + 1 END) AS n
             FROM (SELECT count(units) AS sold, count(*) AS listed,
                          min(week) FILTER (WHERE units IS NOT NULL) AS first, max(week) FILTER (WHERE units IS NOT NULL) AS last
                   FROM sales GROUP BY region, product)",
        )
        .await;
        assert_eq!(count("SELECT count(*) AS n FROM written_components").await, weeks);
    });
}

#[test]
fn the_region_comes_back_as_a_column_of_text() {
    let outlook = Outlook::get();
    block(async {
        let context = outlook.session().await;
        let sql = "SELECT region, count(*) AS n FROM written_forecast GROUP BY region ORDER BY region";
        let batch = rows(&context, sql).await;
        assert_eq!(texts(&batch, "region"), ["Coldwater", "Eastfell", "Marrowdale", "Saltmarsh"]);
        let one = "SELECT DISTINCT region FROM written_components WHERE region = 'Eastfell'";
        assert_eq!(rows(&context, one).await.num_rows(), 1);
    });
}
