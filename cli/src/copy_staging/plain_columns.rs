//! The columns of a COPY in types that every reader of the files knows.
//!
//! The engine reads strings as views and the values of hive folders as dictionaries, and writes them so; a
//! Parquet file then carries types that several readers refuse or show as categories. They are written as plain
//! strings and bytes here.
//!
//! A column of PARTITIONED BY becomes text, since the engine takes only some types there. A NULL in it becomes
//! `__HIVE_DEFAULT_PARTITION__`, the name by which readers of hive folders know NULL: left to the engine, NULL
//! would be filed under 0 or under the empty name. Where the session keeps such columns in the files as well, they are
//! left as they are.

use std::sync::Arc;

use arrow::datatypes::DataType;
use datafusion::common::{Column, Result};
use datafusion::functions::core::expr_fn::coalesce;
use datafusion::logical_expr::dml::CopyTo;
use datafusion::logical_expr::{Expr, LogicalPlanBuilder, cast, lit};

/// The folder value that stands for NULL, by the convention of Hive.
const NULL_FOLDER: &str = "__HIVE_DEFAULT_PARTITION__";

/// `copy` with a projection on top of its input where a column needs one.
///
/// `keeps_keys`: the columns of PARTITIONED BY stay in the files as well (an option of the statement may say otherwise);
/// then they keep their types.
pub(super) fn simplify(copy: CopyTo, keeps_keys: bool) -> Result<CopyTo> {
    let keeps_keys =
        copy.options.get("execution.keep_partition_by_columns").map_or(keeps_keys, |v| v.trim() == "true");
    let mut changed = false;
    let columns: Vec<Expr> = copy
        .input
        .schema()
        .iter()
        .map(|(qualifier, field)| {
            let column = Expr::Column(Column::from((qualifier, field)));
            let key = copy.partition_by.contains(field.name()) && !keeps_keys;
            let plain = if key { DataType::Utf8 } else { plain_type(field.data_type()) };
            let filed = key && field.is_nullable();
            if plain == *field.data_type() && !filed {
                return column;
            }
            changed = true;
            let written = if plain == *field.data_type() { column } else { cast(column, plain) };
            let written = if filed { coalesce(vec![written, lit(NULL_FOLDER)]) } else { written };
            written.alias(field.name())
        })
        .collect();
    if !changed {
        return Ok(copy);
    }
    let input = LogicalPlanBuilder::from(Arc::unwrap_or_clone(copy.input)).project(columns)?.build()?;
    Ok(CopyTo::new(Arc::new(input), copy.output_url, copy.partition_by, copy.file_type, copy.options))
}

/// The type a column of type `kind` is written in.
pub(crate) fn plain_type(kind: &DataType) -> DataType {
    match kind {
        DataType::Utf8View => DataType::Utf8,
        DataType::BinaryView => DataType::Binary,
        DataType::Dictionary(_, values) => plain_type(values),
        other => other.clone(),
    }
}

#[cfg(test)]
mod tests {
    use arrow::array::AsArray;
    use datafusion::prelude::SessionContext;

    use super::*;
    use datafusion::logical_expr::LogicalPlan;

    async fn simplified(sql: &str) -> CopyTo {
        let plan = SessionContext::new().state().create_logical_plan(sql).await.expect("plans");
        let LogicalPlan::Copy(copy) = plan else { panic!("no COPY: {sql}") };
        simplify(copy, false).expect("simplifies")
    }

    #[tokio::test]
    async fn views_and_dictionaries_become_plain() {
        let copy = simplified(
            "COPY (SELECT arrow_cast('a', 'Utf8View') AS v, arrow_cast('b', 'Dictionary(Int32, Utf8)') AS d, 1 AS n) \
             TO 'x.parquet'",
        )
        .await;
        let types: Vec<_> = copy.input.schema().fields().iter().map(|f| f.data_type().clone()).collect();
        assert_eq!(types, [DataType::Utf8, DataType::Utf8, DataType::Int64]);
    }

    #[tokio::test]
    async fn null_keys_are_filed_as_null() {
        let copy = simplified(
            "COPY (SELECT * FROM (VALUES (7, 1.5), (NULL, 2.5)) AS t(depot, litres)) TO 'x/' STORED AS PARQUET \
             PARTITIONED BY (depot)",
        )
        .await;
        let context = SessionContext::new();
        let frame = context.execute_logical_plan(Arc::unwrap_or_clone(copy.input)).await.expect("runs");
        let batches = frame.collect().await.expect("rows");
        let keys: Vec<_> = batches[0].column(0).as_string::<i32>().iter().flatten().collect();
        assert_eq!(keys, ["7", NULL_FOLDER]);
    }

    #[tokio::test]
    async fn plain_columns_are_left_alone() {
        let copy = simplified("COPY (SELECT 1 AS n, 'a' AS s) TO 'x.parquet'").await;
        assert!(!copy.input.display().to_string().contains("CAST"), "{}", copy.input.display());
    }
}
