//! Sessions with the functions, and readers of what queries answer.

use std::env;
use std::path::{Path, PathBuf};
use std::sync::{Arc, LazyLock};

use arrow::array::{Array, AsArray, RecordBatch};
use arrow::compute::{cast, concat_batches};
use arrow::datatypes::{DataType, Float64Type};
use datafusion::error::Result;
use datafusion::prelude::{SessionConfig, SessionContext};

/// The root of the repository, which is also made the current directory: jobs and documents name their files
/// from there.
pub(crate) static ROOT: LazyLock<PathBuf> = LazyLock::new(|| {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).parent().expect("the package lies in the repository");
    env::set_current_dir(root).expect("the root of the repository");
    root.to_path_buf()
});

/// A session with the functions, at the root of the repository.
pub(crate) fn session_with(config: SessionConfig) -> SessionContext {
    LazyLock::force(&ROOT);
    let context = SessionContext::new_with_config(config);
    stillwell::register(&context).expect("a plain session takes the functions");
    context
}

/// The same with files as tables: `FROM 'folder/*.parquet'`.
pub(crate) fn session_over_files() -> SessionContext {
    LazyLock::force(&ROOT);
    let context = SessionContext::new_with_config(SessionConfig::new().with_information_schema(true));
    let context = context.enable_url_table();
    stillwell::register(&context).expect("a plain session takes the functions");
    context
}

/// The rows of a statement as one batch.
pub(crate) async fn query(context: &SessionContext, sql: &str) -> Result<RecordBatch> {
    let frame = context.sql(sql).await?;
    let schema = Arc::clone(frame.schema().inner());
    let batches = frame.collect().await?;
    let schema = batches.first().map_or(schema, RecordBatch::schema);
    Ok(concat_batches(&schema, &batches)?)
}

/// The rows of a statement that must succeed.
pub(crate) async fn rows(context: &SessionContext, sql: &str) -> RecordBatch {
    query(context, sql).await.unwrap_or_else(|error| panic!("{sql}\n{}", error.strip_backtrace()))
}

/// A numeric column as `f64`, NULL as NaN.
pub(crate) fn numbers(batch: &RecordBatch, name: &str) -> Vec<f64> {
    let column = cast(column(batch, name), &DataType::Float64).expect("a numeric column");
    column.as_primitive::<Float64Type>().iter().map(|value| value.unwrap_or(f64::NAN)).collect()
}

/// A column as text, NULL as "NULL".
pub(crate) fn texts(batch: &RecordBatch, name: &str) -> Vec<String> {
    let column = cast(column(batch, name), &DataType::Utf8).expect("a column that can be text");
    column.as_string::<i32>().iter().map(|text| text.unwrap_or("NULL").to_string()).collect()
}

/// The one number of a one-row column.
#[track_caller]
pub(crate) fn number(batch: &RecordBatch, name: &str) -> f64 {
    match numbers(batch, name).as_slice() {
        [one] => *one,
        several => panic!("{name} has {} rows, not one", several.len()),
    }
}

#[track_caller]
fn column<'a>(batch: &'a RecordBatch, name: &str) -> &'a dyn Array {
    batch.column_by_name(name).unwrap_or_else(|| panic!("no column {name} in {}", batch.schema())).as_ref()
}
