//! Input that already lies in the order of the series.
//!
//! Parquet files say in their metadata how their rows are sorted, and a table can be declared WITH ORDER. The engine knows
//! such an order file by file, and loses it when it deals the files out to its partitions. Here they are laid end to end
//! instead, where that gives one stream sorted by key and time: with one sorted file per value of PARTITIONED BY, say, or
//! with files whose ranges of keys do not overlap. Such a stream needs neither a repartition nor a sort, takes no memory
//! for them, and is read as it comes; the operator spreads its series over all cores by itself.
//!
//! Whether the order holds from file to file is judged by the engine, by the least and greatest values in the statistics of
//! the files, and the whole by the properties of the resulting plan. The rows themselves are looked at as they arrive: an
//! order that is declared and not kept is an error of the query, never a wrong group.

use std::sync::Arc;

use datafusion::common::stats::Precision;
use datafusion::datasource::listing::PartitionedFile;
use datafusion::datasource::physical_plan::{FileGroup, FileScanConfig, FileScanConfigBuilder};
use datafusion::datasource::source::DataSourceExec;
use datafusion::physical_expr::expressions::Column;
use datafusion::physical_expr::{LexOrdering, LexRequirement, Partitioning, PhysicalSortExpr};
use datafusion::physical_plan::filter::FilterExec;
use datafusion::physical_plan::projection::ProjectionExec;
use datafusion::physical_plan::{
    ChildrenPropertiesMode, ExecutionPlan, ExecutionPlanProperties, ReplaceChildrenOptions,
};

use crate::columns::groups::ORDER;

/// `input` as one stream in the `required` order, if it takes no more than reading its files one after the other.
pub(super) fn arranged(
    input: &Arc<dyn ExecutionPlan>,
    required: &LexRequirement,
) -> Option<Arc<dyn ExecutionPlan>> {
    let suits = |plan: &Arc<dyn ExecutionPlan>| {
        let sorted = plan.equivalence_properties().ordering_satisfy_requirement(required.clone());
        plan.output_partitioning().partition_count() == 1 && sorted.unwrap_or(false)
    };
    let scan = scan_of(input)?;
    orders(scan)
        .into_iter()
        .filter_map(|order| end_to_end(scan, &order))
        .filter_map(|scan| with_scan(input, scan))
        .find(suits)
}

/// The scan below operators that neither reorder nor count rows.
fn scan_of(plan: &Arc<dyn ExecutionPlan>) -> Option<&FileScanConfig> {
    match plan.downcast_ref::<DataSourceExec>() {
        Some(scan) => scan.data_source().downcast_ref::<FileScanConfig>().filter(|scan| scan.limit.is_none()),
        None => scan_of(only_child(plan)?),
    }
}

fn only_child(plan: &Arc<dyn ExecutionPlan>) -> Option<&Arc<dyn ExecutionPlan>> {
    let passes = plan.is::<ProjectionExec>() || (plan.is::<FilterExec>() && plan.fetch().is_none());
    plan.children().into_iter().next().filter(|_| passes)
}

/// The same plan over another scan.
fn with_scan(plan: &Arc<dyn ExecutionPlan>, scan: Arc<dyn ExecutionPlan>) -> Option<Arc<dyn ExecutionPlan>> {
    if plan.is::<DataSourceExec>() {
        return Some(scan);
    }
    let child = with_scan(only_child(plan)?, scan)?;
    let options = ReplaceChildrenOptions::new(ChildrenPropertiesMode::Recompute);
    Arc::clone(plan).replace_children(vec![child], options).ok()
}

/// Orders that the files together may have: the one each of them has, and that one after the columns of PARTITIONED BY,
/// which do not change within a file.
fn orders(scan: &FileScanConfig) -> Vec<LexOrdering> {
    let Some(each) = scan.output_ordering.first() else { return Vec::new() };
    let columns = scan.table_partition_cols();
    let of_folders = |expr: &PhysicalSortExpr| {
        let column = expr.expr.downcast_ref::<Column>();
        column.is_some_and(|column| columns.iter().any(|folder| folder.name() == column.name()))
    };
    // Columns of the folders stand after those of the files.
    let first = scan.file_schema().fields().len();
    let folders = columns
        .iter()
        .enumerate()
        .map(|(at, field)| PhysicalSortExpr::new(Arc::new(Column::new(field.name(), first + at)), ORDER));
    let within = each.iter().filter(|expr| !of_folders(expr)).cloned();
    let behind_folders = LexOrdering::new(folders.chain(within));
    std::iter::once(each.clone()).chain(behind_folders).collect()
}

/// The scan with all its files in one group, in this order; `None` where they overlap or too little is known of them.
fn end_to_end(scan: &FileScanConfig, order: &LexOrdering) -> Option<Arc<dyn ExecutionPlan>> {
    let files = || scan.file_groups.iter().flat_map(FileGroup::iter);
    if files().any(|file| file.range.is_some()) {
        return None;
    }
    let schema = scan.file_source.table_schema().table_schema();
    let groups = match files().count() {
        0 => return None,
        1 => vec![FileGroup::new(files().cloned().collect())],
        _ => FileScanConfig::split_groups_by_statistics(schema, &scan.file_groups, order).ok()?,
    };
    let [group] = <[FileGroup; 1]>::try_from(groups).ok()?;
    let neighbours = group.files().iter().zip(group.files().iter().skip(1));
    if neighbours.into_iter().any(|(file, next)| may_hide_nulls(file, next, order, scan)) {
        return None;
    }
    let config = FileScanConfigBuilder::from(scan.clone())
        .with_file_groups(vec![group])
        .with_output_ordering(vec![order.clone()])
        // Said outright, so that nobody cuts the files into ranges again.
        .with_output_partitioning(Some(Partitioning::UnknownPartitioning(1)))
        .build();
    Some(DataSourceExec::from_data_source(config))
}

/// Statistics leave NULLs out, which stand last in a file and would come before the next one. Files from different folders
/// are told apart by the folders.
fn may_hide_nulls(
    file: &PartitionedFile,
    next: &PartitionedFile,
    order: &LexOrdering,
    scan: &FileScanConfig,
) -> bool {
    if file.partition_values != next.partition_values {
        return false;
    }
    let schema = scan.file_schema();
    let without_nulls = |expr: &PhysicalSortExpr| {
        let Some(column) = expr.expr.downcast_ref::<Column>() else { return false };
        let at = column.index();
        if schema.fields().get(at).is_none_or(|field| !field.is_nullable()) {
            return true;
        }
        let of_file = file.statistics.as_ref().and_then(|known| known.column_statistics.get(at));
        of_file.is_some_and(|known| known.null_count == Precision::Exact(0))
    };
    !order.iter().all(without_nulls)
}

#[cfg(test)]
mod tests;
