//! One statement of a job or a shell: planned, staged if it writes, run.

use std::io::BufWriter;

use arrow::array::AsArray;
use arrow::datatypes::UInt64Type;
use datafusion::common::DataFusionError;
use datafusion::execution::context::SessionContext;
use datafusion::logical_expr::{DdlStatement, LogicalPlan, WriteOp};
use datafusion::sql::parser::Statement;
use futures::StreamExt;

use crate::copy_staging::{self, Written};
use crate::errors;
use crate::exit::Outcome;
use crate::formats::Format;
use crate::rows::{TableSize, write_rows};
use crate::session;
use crate::stores;
use crate::streams::Out;
use crate::table::Table;

/// How rows are shown.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Show {
    pub(crate) format: Format,
    /// Rows that a table shows; 0 = all.
    pub(crate) rows: usize,
}

/// What a statement has left: files, or rows to show.
#[derive(Debug, Default)]
pub(crate) struct Step {
    pub(crate) written: Option<Written>,
    /// Rows that wait to be shown; those in other formats are written to the output already.
    pub(crate) table: Option<Table>,
    /// Number of the rows that were given or written, where it is known.
    pub(crate) rows: Option<u64>,
}

/// Runs `statement`. What a COPY writes to local files is in its place when this returns.
///
/// # Errors
/// Why the statement cannot be done; nothing half-written is left on the local file system.
pub(crate) async fn execute(
    context: SessionContext,
    statement: Statement,
    show: Show,
    out: Out,
) -> Outcome<Step> {
    let engine = |error: DataFusionError| errors::failure(&error);
    let plan = session::plan(&context, statement).await?;
    if out.closed() && only_shows(&plan) {
        return Ok(Step::default());
    }
    if let LogicalPlan::Ddl(DdlStatement::CreateExternalTable(table)) = &plan {
        table.locations.iter().try_for_each(|place| stores::check_location(place)).map_err(engine)?;
    }
    let inserted = insert_target(&plan);
    let explained = matches!(plan, LogicalPlan::Analyze(_));
    let prepared = copy_staging::prepare(plan, &context).await?;
    let counts = !explained && (prepared.writes() || inserted.is_some());
    let given = match give(&context, prepared.plan.clone(), counts, show, out).await {
        Ok(given) => given,
        Err(failure) => {
            prepared.discard().await;
            return Err(failure);
        }
    };
    let written = prepared
        .finish(given.written)
        .await?
        .or_else(|| inserted.map(|target| Written { target, kind: None, rows: given.written, files: None }));
    let rows = given.written.or(given.shown);
    Ok(Step { written, table: given.table, rows })
}

/// What a plan has given.
#[derive(Debug, Default)]
struct Given {
    /// Rows that wait to be shown.
    table: Option<Table>,
    /// Number of the rows that were shown or wait to be.
    shown: Option<u64>,
    /// Number of the rows that were written, by the engine's count.
    written: Option<u64>,
}

/// Runs a plan. `counts`: its rows are the engine's counts of what it has written.
async fn give(
    context: &SessionContext,
    plan: LogicalPlan,
    counts: bool,
    show: Show,
    out: Out,
) -> Outcome<Given> {
    let engine = |error: DataFusionError| errors::failure(&error);
    let frame = context.execute_logical_plan(plan).await.map_err(engine)?;
    let mut stream = frame.execute_stream().await.map_err(engine)?;
    if counts {
        let mut written = None;
        while let Some(batch) = stream.next().await {
            let batch = batch.map_err(engine)?;
            let counts = batch.columns().first().and_then(|column| column.as_primitive_opt::<UInt64Type>());
            let added: u64 = counts.map_or(0, |counts| counts.iter().flatten().sum());
            written = Some(written.unwrap_or(0) + added);
        }
        return Ok(Given { written, ..Given::default() });
    }
    let has_columns = !stream.schema().fields().is_empty();
    if has_columns && show.format != Format::Table {
        let size = TableSize { rows: show.rows, width: None };
        let shown = write_rows(stream, show.format, BufWriter::new(out.clone()), size, &out).await?;
        return Ok(Given { shown: Some(shown), ..Given::default() });
    }
    let mut table = Table::new(stream.schema(), show.rows);
    while let Some(batch) = stream.next().await {
        table.push(&batch.map_err(engine)?);
    }
    // SET and CREATE give a result without columns.
    let table = has_columns.then_some(table);
    Ok(Given { shown: table.as_ref().map(Table::rows), table, written: None })
}

/// Whether a plan does nothing but give rows.
fn only_shows(plan: &LogicalPlan) -> bool {
    !matches!(
        plan,
        LogicalPlan::Ddl(_)
            | LogicalPlan::Dml(_)
            | LogicalPlan::Copy(_)
            | LogicalPlan::Statement(_)
            | LogicalPlan::Analyze(_)
    )
}

/// The table that an INSERT adds to.
fn insert_target(plan: &LogicalPlan) -> Option<String> {
    match plan {
        LogicalPlan::Dml(dml) if matches!(dml.op, WriteOp::Insert(_)) => Some(dml.table_name.to_string()),
        _ => None,
    }
}
