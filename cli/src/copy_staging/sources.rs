//! A COPY must not replace what it reads: the history would be exchanged for a result made of it.

use std::path::PathBuf;

use datafusion::common::tree_node::TreeNodeRecursion;
use datafusion::datasource::listing::{ListingTable, ListingTableUrl};
use datafusion::datasource::source_as_provider;
use datafusion::error::Result;
use datafusion::logical_expr::LogicalPlan;

use super::target::Target;
use crate::errors;
use crate::exit::{Failure, Outcome};

/// Refuses a COPY of `input` to the local `target` when a table of `input` lies in the target, or the target in it.
///
/// # Errors
/// Names the target and what to do.
pub(super) fn refuse(input: &LogicalPlan, target: &Target) -> Outcome<()> {
    let read: Vec<_> = read_by(input)?.iter().filter_map(local).collect();
    let overlaps = |(path, whole): &(PathBuf, bool)| {
        let path = path.canonicalize().unwrap_or_else(|_| path.clone());
        path.starts_with(&target.path) || (*whole && target.path.starts_with(&path))
    };
    match read.iter().find(|place| overlaps(place)) {
        None => Ok(()),
        Some((path, _)) => Err(Failure::failed(format!(
            "COPY to '{}' would replace '{}', which the same statement reads; the source would be gone. Write to a place \
             of its own",
            target.shown,
            path.display()
        ))),
    }
}

/// The places that the tables of a plan lie in, views and subqueries included.
pub(super) fn read_by(plan: &LogicalPlan) -> Outcome<Vec<ListingTableUrl>> {
    let mut read = Vec::new();
    collect(plan, &mut read).map_err(|error| errors::failure(&error))?;
    Ok(read)
}

fn collect(plan: &LogicalPlan, read: &mut Vec<ListingTableUrl>) -> Result<()> {
    plan.apply_with_subqueries(|node| {
        if let LogicalPlan::TableScan(scan) = node
            && let Ok(provider) = source_as_provider(&scan.source)
        {
            if let Some(table) = provider.downcast_ref::<ListingTable>() {
                read.extend(table.table_paths().iter().cloned());
            } else if let Some(view) = provider.get_logical_plan() {
                collect(&view, read)?;
            }
        }
        Ok(TreeNodeRecursion::Continue)
    })?;
    Ok(())
}

/// A local place and whether everything below it is read (with a pattern it is not).
fn local(url: &ListingTableUrl) -> Option<(PathBuf, bool)> {
    if url.scheme() != "file" {
        return None;
    }
    let whole = url.get_glob().is_none();
    let url: &url::Url = url.as_ref();
    let path = url.to_file_path().ok()?;
    // Without the trailing slash of a folder.
    Some((path.components().collect(), whole))
}
