//! From sorted record batches to groups of rows, one group per series.
//!
//! The rows arrive sorted by key and time, cut into batches at arbitrary places. [`Groups`] finds the
//! boundaries, across batches too, and collects the rows of each series as plain vectors. Within a batch
//! neighbouring rows are compared column by column, by kernels that take the whole column at once; only the
//! first row of each run is then put into arrow's row format and compared with the run before it. Both ways know
//! every type that can be sorted (dictionaries, string views, nested types), and to both NULL equals NULL: a
//! NULL key is a key like any other.
//!
//! The keys themselves are not copied. A [`Key`] points into the batch in which its series began, and
//! [`repeat_keys`] gathers the key columns of a result from there, so that names and types stay as they were.

use std::cmp::Ordering;
use std::collections::VecDeque;
use std::sync::Arc;

use arrow::array::{Array, ArrayRef, UInt64Array};
use arrow::compute::{SortOptions, interleave, partition, take_arrays};
use arrow::datatypes::DataType;
use arrow::error::ArrowError;
use arrow::row::{OwnedRow, RowConverter, SortField};
use arrow::util::display::{ArrayFormatter, FormatOptions};

/// The order in which key columns and time must arrive.
pub(crate) const ORDER: SortOptions = SortOptions { descending: false, nulls_first: false };

/// Where the key of a series stands: a row of the key columns of one batch.
#[derive(Debug, Clone)]
pub(crate) struct Key {
    columns: Arc<[ArrayRef]>,
    row: usize,
}

impl Key {
    /// The key as text for people: `region=North, product=Oat milk`; empty for a series without a key.
    pub(crate) fn describe(&self, names: &[String]) -> String {
        let options = FormatOptions::default().with_null("NULL");
        let parts = names.iter().zip(self.columns.iter()).map(|(name, column)| {
            let value = ArrayFormatter::try_new(column.as_ref(), &options)
                .map_or_else(|_| "?".to_string(), |formatter| formatter.value(self.row).to_string());
            format!("{name}={value}")
        });
        parts.collect::<Vec<_>>().join(", ")
    }
}

/// The rows of one series in order of time.
#[derive(Debug, Clone)]
pub(crate) struct Group {
    /// Its key.
    pub(crate) key: Key,
    /// Times in the unit of the time column; NULLs last.
    pub(crate) times: Vec<Option<i64>>,
    /// Observed values, NaN = missing.
    pub(crate) observed: Vec<f64>,
    /// One vector per driver (drivers with constant coefficients, then drifting ones), NaN = missing.
    pub(crate) drivers: Vec<Vec<f64>>,
}

impl Group {
    /// Number of rows.
    pub(crate) fn len(&self) -> usize {
        self.times.len()
    }
}

/// The columns of one batch that matter, as vectors of equal length.
#[derive(Debug)]
pub(crate) struct Rows {
    /// Key columns.
    pub(crate) keys: Vec<ArrayRef>,
    /// Time.
    pub(crate) times: Vec<Option<i64>>,
    /// Observed values, NaN = missing.
    pub(crate) observed: Vec<f64>,
    /// Drivers, NaN = missing.
    pub(crate) drivers: Vec<Vec<f64>>,
}

/// Rows of one key within a batch.
struct Run {
    start: usize,
    end: usize,
    /// They belong to the series that the rows before them belong to.
    goes_on: bool,
}

/// Cuts sorted rows into groups.
#[derive(Debug)]
pub(crate) struct Groups {
    /// Absent when there is no key: then all rows are one series.
    converter: Option<RowConverter>,
    /// Nested keys are compared for equality only; their sort order is the engine's own affair.
    ordered: bool,
    /// Key of the open group, in row format.
    open_key: Option<OwnedRow>,
    open: Option<Group>,
    done: VecDeque<Group>,
}

impl Groups {
    /// `key_types`: the types of the key columns, none for a single series.
    ///
    /// # Errors
    /// A key type that cannot be sorted (maps, unions).
    pub(crate) fn try_new(key_types: &[DataType]) -> Result<Self, ArrowError> {
        let fields =
            key_types.iter().map(|t| SortField::new_with_options(t.clone(), ORDER)).collect::<Vec<_>>();
        let converter = if fields.is_empty() { None } else { Some(RowConverter::new(fields)?) };
        let ordered = !key_types.iter().any(DataType::is_nested);
        Ok(Self { converter, ordered, open_key: None, open: None, done: VecDeque::new() })
    }

    /// Adds the next rows.
    ///
    /// # Errors
    /// Rows that are not sorted by key and time: the engine has broken its promise, and grouping on would
    /// silently split series.
    pub(crate) fn push(&mut self, rows: Rows) -> Result<(), ArrowError> {
        let runs = self.runs(&rows)?;
        let Rows { keys, times, observed, drivers } = rows;
        let keys: Arc<[ArrayRef]> = keys.into();
        for Run { start, end, goes_on } in runs {
            if !goes_on {
                self.close();
            }
            let group = self.open.get_or_insert_with(|| Group {
                key: Key { columns: Arc::clone(&keys), row: start },
                times: Vec::new(),
                observed: Vec::new(),
                drivers: vec![Vec::new(); drivers.len()],
            });
            // The last time that is there already is looked at again: the pair across the boundary counts too.
            let seam = group.times.len().saturating_sub(1);
            group.times.extend_from_slice(&times[start..end]);
            group.observed.extend_from_slice(&observed[start..end]);
            for (all, new) in group.drivers.iter_mut().zip(&drivers) {
                all.extend_from_slice(&new[start..end]);
            }
            if !times_ascend(&group.times[seam..]) {
                return Err(unsorted("times"));
            }
        }
        Ok(())
    }

    /// The runs of rows with one key.
    fn runs(&mut self, rows: &Rows) -> Result<Vec<Run>, ArrowError> {
        let Some(converter) = &self.converter else {
            let end = rows.times.len();
            return Ok(if end > 0 { vec![Run { start: 0, end, goes_on: true }] } else { Vec::new() });
        };
        let spans = partition(&rows.keys)?.ranges();
        let starts: UInt64Array = spans.iter().map(|span| span.start as u64).collect();
        let keys = converter.convert_columns(&take_arrays(&rows.keys, &starts, None)?)?;
        let mut runs: Vec<Run> = Vec::with_capacity(spans.len());
        let mut before = self.open_key.as_ref().map(OwnedRow::row);
        for (key, span) in keys.iter().zip(spans) {
            match (before.map(|before| key.cmp(&before)), runs.last_mut()) {
                (Some(Ordering::Less), _) if self.ordered => return Err(unsorted("keys")),
                (Some(Ordering::Equal), Some(run)) => run.end = span.end,
                (order, _) => {
                    let goes_on = order == Some(Ordering::Equal);
                    runs.push(Run { start: span.start, end: span.end, goes_on });
                }
            }
            before = Some(key);
        }
        if let Some(last) = before.filter(|_| !runs.is_empty()) {
            self.open_key = Some(last.owned());
        }
        Ok(runs)
    }

    /// No more rows will come: the open group is complete.
    pub(crate) fn close(&mut self) {
        self.done.extend(self.open.take());
    }

    /// Rows of the group that may still grow.
    pub(crate) fn open_rows(&self) -> usize {
        self.open.as_ref().map_or(0, Group::len)
    }

    /// The next complete group.
    pub(crate) fn pop(&mut self) -> Option<Group> {
        self.done.pop_front()
    }
}

/// Ascending with NULLs last, equal neighbours allowed.
fn times_ascend(times: &[Option<i64>]) -> bool {
    times.windows(2).all(|pair| match (pair[0], pair[1]) {
        (Some(earlier), Some(later)) => earlier <= later,
        (None, Some(_)) => false,
        (_, None) => true,
    })
}

fn unsorted(what: &str) -> ArrowError {
    ArrowError::ComputeError(format!(
        "the rows did not arrive sorted by key and time ({what} go back). A table that is declared WITH ORDER, or Parquet \
         whose metadata names sorting columns, must keep that order; to have the rows sorted all the same, leave WITH ORDER out; \
         against sorting columns, SET datafusion.execution.collect_statistics = false before the table is made. If nothing \
         declares an order, please report this"
    ))
}

/// The key columns of a result in which the key of `keys[i]` stands `counts[i]` times.
///
/// # Errors
/// Dictionary keys whose combined values no longer fit their index type.
pub(crate) fn repeat_keys(keys: &[&Key], counts: &[usize]) -> Result<Vec<ArrayRef>, ArrowError> {
    let Some(first) = keys.first() else { return Ok(Vec::new()) };
    // Series that began in the same batch stand side by side: each batch is named once.
    let mut batches: Vec<&Arc<[ArrayRef]>> = Vec::new();
    let mut picks = Vec::with_capacity(counts.iter().sum());
    for (key, &count) in keys.iter().zip(counts) {
        if !batches.last().is_some_and(|last| Arc::ptr_eq(last, &key.columns)) {
            batches.push(&key.columns);
        }
        picks.extend(std::iter::repeat_n((batches.len() - 1, key.row), count));
    }
    (0..first.columns.len())
        .map(|column| {
            let sources =
                batches.iter().map(|batch| batch[column].as_ref() as &dyn Array).collect::<Vec<_>>();
            interleave(&sources, &picks)
        })
        .collect()
}

#[cfg(test)]
mod tests;
