//! The rows of a running statement, written in a format as they come.

use std::io::Write;

use datafusion::execution::SendableRecordBatchStream;
use futures::StreamExt;

use crate::errors;
use crate::exit::{Failure, Outcome};
use crate::formats::{Format, RowWriter};
use crate::streams::Out;
use crate::table::{MORE, Table};

/// How much of a result a table shows.
#[derive(Debug, Clone, Copy)]
pub(crate) struct TableSize {
    /// Rows; 0 = all.
    pub(crate) rows: usize,
    /// Columns of the terminal it is shown on.
    pub(crate) width: Option<usize>,
}

/// Writes the rows of `stream` to `sink` and returns their number. Ends early once `out` is closed.
///
/// # Errors
/// When the statement fails, the format has no place for a column, or the sink refuses.
pub(crate) async fn write_rows(
    mut stream: SendableRecordBatchStream,
    format: Format,
    mut sink: impl Write + Send,
    table: TableSize,
    out: &Out,
) -> Outcome<u64> {
    let schema = stream.schema();
    let mut rows = 0;
    let Some(mut writer) = RowWriter::new(format, &mut sink, &schema)? else {
        return write_table(stream, sink, table).await;
    };
    while let Some(batch) = stream.next().await {
        let batch = batch.map_err(|error| errors::failure(&error))?;
        rows += batch.num_rows() as u64;
        writer.write(&batch)?;
        if out.closed() {
            break;
        }
    }
    writer.finish()?;
    Ok(rows)
}

async fn write_table(
    mut stream: SendableRecordBatchStream,
    mut sink: impl Write,
    size: TableSize,
) -> Outcome<u64> {
    let mut table = Table::new(stream.schema(), size.rows);
    while let Some(batch) = stream.next().await {
        table.push(&batch.map_err(|error| errors::failure(&error))?);
    }
    sink.write_all(table.render(size.width, MORE)?.as_bytes())
        .and_then(|()| sink.flush())
        .map_err(|error| Failure::failed(format!("cannot write the rows: {error}")))?;
    Ok(table.rows())
}
