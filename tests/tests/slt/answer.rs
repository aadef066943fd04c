//! An answer as the records write it: one letter per column, one text per value.

use arrow::array::{Array, RecordBatch};
use arrow::datatypes::DataType;
use arrow::error::ArrowError;
use arrow::util::display::{ArrayFormatter, FormatOptions};
use sqllogictest::ColumnType;

/// What a column holds.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum Kind {
    /// `B`
    Boolean,
    /// `D`: a date.
    Date,
    /// `P`: a timestamp.
    Moment,
    /// `I`
    Integer,
    /// `R`: floating point or decimal.
    Real,
    /// `T`
    Text,
    /// `?`
    Other,
}

impl Kind {
    /// Of an Arrow type; dictionaries are what they hold.
    pub(crate) fn of(data_type: &DataType) -> Self {
        match data_type {
            DataType::Boolean => Self::Boolean,
            DataType::Date32 | DataType::Date64 => Self::Date,
            DataType::Timestamp(..) => Self::Moment,
            DataType::Utf8 | DataType::LargeUtf8 | DataType::Utf8View => Self::Text,
            DataType::Dictionary(_, value) => Self::of(value),
            integer if integer.is_integer() => Self::Integer,
            number if number.is_numeric() => Self::Real,
            _ => Self::Other,
        }
    }
}

impl ColumnType for Kind {
    fn from_char(letter: char) -> Option<Self> {
        Some(match letter {
            'B' => Self::Boolean,
            'D' => Self::Date,
            'P' => Self::Moment,
            'I' => Self::Integer,
            'R' => Self::Real,
            'T' => Self::Text,
            '?' => Self::Other,
            _ => return None,
        })
    }

    fn to_char(&self) -> char {
        match self {
            Self::Boolean => 'B',
            Self::Date => 'D',
            Self::Moment => 'P',
            Self::Integer => 'I',
            Self::Real => 'R',
            Self::Text => 'T',
            Self::Other => '?',
        }
    }
}

/// The rows as text. A row with values of several lines becomes one numbered row per line of the last column.
pub(crate) fn rows(batch: &RecordBatch) -> Result<Vec<Vec<String>>, ArrowError> {
    let options = FormatOptions::default().with_null("NULL");
    let columns = batch
        .columns()
        .iter()
        .map(|column| ArrayFormatter::try_new(column.as_ref(), &options).map(|format| (column, format)))
        .collect::<Result<Vec<_>, _>>()?;
    let mut rows = Vec::with_capacity(batch.num_rows());
    for at in 0..batch.num_rows() {
        let mut row = columns.iter().map(|(column, format)| text(column, format, at)).collect::<Vec<_>>();
        match row.pop() {
            Some(last) if last.trim_end().contains('\n') => {
                rows.push(row);
                rows.extend(
                    last.trim_end().lines().enumerate().map(|(number, line)| vec![numbered(number, line)]),
                );
            }
            Some(last) => {
                row.push(last);
                rows.push(row);
            }
            None => {}
        }
    }
    Ok(rows)
}

fn text(column: &dyn Array, format: &ArrayFormatter<'_>, at: usize) -> String {
    match format.value(at).to_string() {
        empty if empty.is_empty() && column.is_valid(at) => "(empty)".to_string(),
        // Rounding leaves a sign on zero that says nothing.
        zero if zero == "-0.0" => "0.0".to_string(),
        text => text,
    }
}

/// A line of a plan, its depth as dashes because records do not keep leading spaces.
fn numbered(number: usize, line: &str) -> String {
    let depth = line.len() - line.trim_start().len();
    format!("{:02}){}{}", number + 1, "-".repeat(depth), line.trim())
}
