//! Rows of a result, written series by series.
//!
//! A writer begins a series with its number of rows, names the columns it has something to say about and
//! ends the series; whatever was not named becomes NULL, which is also all there is to say about most
//! columns of a series in trouble. NaN becomes NULL: a result column never holds a NaN.

use std::sync::Arc;

use arrow::array::{
    ArrayBuilder, ArrayRef, BooleanBuilder, Float64Builder, Int64Builder, RecordBatch, RecordBatchOptions,
    StringBuilder,
};
use arrow::error::ArrowError;

use super::{ColumnKind, ResultSchema};
use crate::columns::groups::{Key, repeat_keys};
use crate::columns::time::TimeKind;

/// Values of one column so far.
#[derive(Debug)]
enum Values {
    Time(Vec<Option<i64>>),
    Number(Float64Builder),
    Count(Int64Builder),
    Text(StringBuilder),
    Flag(BooleanBuilder),
}

impl Values {
    fn new(kind: ColumnKind) -> Self {
        match kind {
            ColumnKind::Time => Self::Time(Vec::new()),
            ColumnKind::Number => Self::Number(Float64Builder::new()),
            ColumnKind::Count => Self::Count(Int64Builder::new()),
            ColumnKind::Text => Self::Text(StringBuilder::new()),
            ColumnKind::Flag => Self::Flag(BooleanBuilder::new()),
        }
    }

    fn len(&self) -> usize {
        match self {
            Self::Time(values) => values.len(),
            Self::Number(values) => values.len(),
            Self::Count(values) => values.len(),
            Self::Text(values) => values.len(),
            Self::Flag(values) => values.len(),
        }
    }

    fn pad(&mut self, length: usize) {
        let missing = length.saturating_sub(self.len());
        match self {
            Self::Time(values) => values.extend(std::iter::repeat_n(None, missing)),
            Self::Number(values) => values.append_nulls(missing),
            Self::Count(values) => values.append_nulls(missing),
            Self::Text(values) => (0..missing).for_each(|_| values.append_null()),
            Self::Flag(values) => values.append_nulls(missing),
        }
    }
}

/// Builds one record batch of a result.
#[derive(Debug)]
pub(crate) struct ResultRows {
    shape: Arc<ResultSchema>,
    time: TimeKind,
    columns: Vec<Values>,
    keys: Vec<Key>,
    counts: Vec<usize>,
    /// Rows of the series that have ended.
    rows: usize,
    /// The first slip of a writer: a column that is not there, of another kind, or of another length.
    fault: Option<String>,
}

impl ResultRows {
    /// `time` is the type of the time columns.
    pub(crate) fn new(shape: Arc<ResultSchema>, time: TimeKind) -> Self {
        let columns = shape.kinds.iter().map(|&kind| Values::new(kind)).collect();
        Self { shape, time, columns, keys: Vec::new(), counts: Vec::new(), rows: 0, fault: None }
    }

    /// Starts a series of `rows` rows.
    pub(crate) fn begin(&mut self, key: &Key, rows: usize) {
        self.keys.push(key.clone());
        self.counts.push(rows);
    }

    /// Rows of the series that has begun.
    fn open_rows(&self) -> usize {
        self.counts.last().copied().unwrap_or(0)
    }

    fn slip(&mut self, what: String) {
        self.fault.get_or_insert(what);
    }

    /// True if the result has this column.
    pub(crate) fn has(&self, name: &str) -> bool {
        self.shape.position.contains_key(name)
    }

    /// Appends through `write` if the column is there and `write` accepts its kind.
    fn with_column(&mut self, name: &str, write: impl FnOnce(&mut Values) -> bool) {
        let column = self.shape.position.get(name).and_then(|&at| self.columns.get_mut(at));
        let written = column.is_some_and(write);
        if !written {
            self.slip(format!("column '{name}' cannot be written"));
        }
    }

    /// Times, one per row.
    pub(crate) fn times(&mut self, name: &str, times: impl IntoIterator<Item = Option<i64>>) {
        self.with_column(name, |column| match column {
            Values::Time(values) => {
                values.extend(times);
                true
            }
            _ => false,
        });
    }

    /// Numbers, one per row; NaN becomes NULL.
    pub(crate) fn numbers(&mut self, name: &str, numbers: impl IntoIterator<Item = f64>) {
        self.with_column(name, |column| match column {
            Values::Number(values) => {
                numbers
                    .into_iter()
                    .for_each(|number| values.append_option((!number.is_nan()).then_some(number)));
                true
            }
            _ => false,
        });
    }

    /// The same number in every row of the series.
    pub(crate) fn number(&mut self, name: &str, number: f64) {
        let rows = self.open_rows();
        self.numbers(name, std::iter::repeat_n(number, rows));
    }

    /// Counts, one per row.
    pub(crate) fn counts(&mut self, name: &str, counts: impl IntoIterator<Item = usize>) {
        self.with_column(name, |column| match column {
            Values::Count(values) => {
                counts.into_iter().for_each(|count| values.append_option(i64::try_from(count).ok()));
                true
            }
            _ => false,
        });
    }

    /// The same text in every row of the series.
    pub(crate) fn text(&mut self, name: &str, text: &str) {
        let rows = self.open_rows();
        self.with_column(name, |column| match column {
            Values::Text(values) => {
                (0..rows).for_each(|_| values.append_value(text));
                true
            }
            _ => false,
        });
    }

    /// The same flag in every row of the series.
    pub(crate) fn flag(&mut self, name: &str, flag: bool) {
        let rows = self.open_rows();
        self.with_column(name, |column| match column {
            Values::Flag(values) => {
                values.append_n(rows, flag);
                true
            }
            _ => false,
        });
    }

    /// Ends the series: columns that were not named are NULL in its rows.
    pub(crate) fn end(&mut self) {
        self.rows += self.open_rows();
        let rows = self.rows;
        self.columns.iter_mut().for_each(|column| column.pad(rows));
        if let Some(at) = self.columns.iter().position(|column| column.len() != rows) {
            self.slip(format!("column {at} has another length than its series"));
        }
    }

    /// The batch.
    ///
    /// # Errors
    /// A slip of a writer, or dictionary keys that no longer fit their index type.
    pub(crate) fn finish(self) -> Result<RecordBatch, ArrowError> {
        if let Some(fault) = self.fault {
            return Err(ArrowError::ComputeError(format!("result rows: {fault}; please report this")));
        }
        let schema = Arc::clone(self.shape.schema());
        let rows = self.rows;
        if self.keys.is_empty() {
            return Ok(RecordBatch::new_empty(schema));
        }
        let mut arrays: Vec<ArrayRef> = repeat_keys(&self.keys.iter().collect::<Vec<_>>(), &self.counts)?;
        for column in self.columns {
            arrays.push(match column {
                Values::Time(values) => self.time.array(&values)?,
                Values::Number(mut values) => Arc::new(values.finish()),
                Values::Count(mut values) => Arc::new(values.finish()),
                Values::Text(mut values) => Arc::new(values.finish()),
                Values::Flag(mut values) => Arc::new(values.finish()),
            });
        }
        RecordBatch::try_new_with_options(
            schema,
            arrays,
            &RecordBatchOptions::new().with_row_count(Some(rows)),
        )
    }
}
