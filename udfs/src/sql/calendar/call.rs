//! A call of a function of the calendar: its arguments, row by row.
//!
//! A constant argument (an interval, a list of holidays) is read once and serves every row.

use datafusion::arrow::array::{Array, ArrayRef, AsArray};
use datafusion::arrow::datatypes::{Int64Type, IntervalMonthDayNanoType};
use datafusion::error::Result;
use datafusion::logical_expr::ColumnarValue;
use stillwell_statespace::calendar::{Axis, Dates, Period, Step};

use super::super::error::{wrong_call, wrong_value};
use super::parameters::Parameter;
use crate::columns::{days, every};

/// The values of one argument.
#[derive(Debug)]
pub(super) enum Values<T> {
    /// The same for all rows.
    Same(Option<T>),
    Each(Vec<Option<T>>),
}

impl<T> Values<T> {
    /// The value of a row, `None` for NULL.
    pub(super) fn at(&self, row: usize) -> Option<&T> {
        match self {
            Self::Same(value) => value.as_ref(),
            Self::Each(values) => values.get(row)?.as_ref(),
        }
    }
}

/// The arguments of one call.
#[derive(Debug)]
pub(super) struct Call<'a> {
    function: &'static str,
    parameters: &'static [Parameter],
    arguments: &'a [ColumnarValue],
    rows: usize,
}

impl<'a> Call<'a> {
    pub(super) fn new(
        function: &'static str,
        parameters: &'static [Parameter],
        arguments: &'a [ColumnarValue],
        rows: usize,
    ) -> Self {
        Self { function, parameters, arguments, rows }
    }

    /// How many rows the result has.
    pub(super) fn rows(&self) -> std::ops::Range<usize> {
        0..self.rows
    }

    /// Whether an argument that may be left out is there.
    pub(super) fn has(&self, index: usize) -> bool {
        index < self.arguments.len()
    }

    /// Day numbers of DATE or TIMESTAMP values.
    pub(super) fn days(&self, index: usize) -> Result<Values<i64>> {
        self.read(index, |array| days::read(array).map_err(|error| error.to_string()))
    }

    /// Plain integers.
    pub(super) fn integers(&self, index: usize) -> Result<Values<i64>> {
        self.read(index, |array| {
            let integers = array.as_primitive_opt::<Int64Type>().ok_or_else(|| unexpected(array))?;
            Ok(integers.iter().collect())
        })
    }

    /// Lists of days, each a set; NULLs in a list are no days.
    pub(super) fn dates(&self, index: usize) -> Result<Values<Dates>> {
        self.read(index, |array| {
            let lists = array.as_list_opt::<i32>().ok_or_else(|| unexpected(array))?;
            let days = days::read(lists.values()).map_err(|error| error.to_string())?;
            let of_row = |row: usize| {
                let offsets = lists.value_offsets();
                let part = offsets[row] as usize..offsets[row + 1] as usize;
                lists.is_valid(row).then(|| days[part].iter().flatten().copied().collect())
            };
            Ok((0..lists.len()).map(of_row).collect())
        })
    }

    /// The period of each row, from the first two arguments: its start and its length.
    pub(super) fn periods(&self) -> Result<Vec<Option<Period>>> {
        let (at, every) = (self.days(0)?, self.steps(1)?);
        let period = |row| {
            let (Some(&day), Some(&step)) = (at.at(row), every.at(row)) else { return Ok(None) };
            // Days of the widest type and months of an interval stay far within the range of day numbers.
            let beyond = || {
                let from = Axis::Days.format(day);
                self.wrong(0, &format!("is {from}, from which the period leaves the range of dates"))
            };
            Period::starting(day, step).ok_or_else(beyond).map(Some)
        };
        self.rows().map(period).collect()
    }

    /// What is wrong with the value of an argument, as an error; `what` continues "argument 'x' …".
    pub(super) fn wrong(&self, index: usize, what: &str) -> datafusion::error::DataFusionError {
        wrong_value(self.function, self.parameters.get(index).map_or("?", |parameter| parameter.name), what)
    }

    /// Lengths of periods.
    fn steps(&self, index: usize) -> Result<Values<Step>> {
        self.read(index, |array| {
            let intervals =
                array.as_primitive_opt::<IntervalMonthDayNanoType>().ok_or_else(|| unexpected(array))?;
            let step = |interval: Option<_>| interval.map(every::of_period).transpose();
            intervals.iter().map(step).collect::<Result<_, _>>().map_err(|error| error.to_string())
        })
    }

    fn read<T>(
        &self,
        index: usize,
        read: impl Fn(&ArrayRef) -> Result<Vec<Option<T>>, String>,
    ) -> Result<Values<T>> {
        let wrong = |what: String| self.wrong(index, &what);
        match self.arguments.get(index) {
            Some(ColumnarValue::Array(array)) => read(array).map(Values::Each).map_err(wrong),
            Some(ColumnarValue::Scalar(value)) => {
                let mut one = read(&value.to_array()?).map_err(wrong)?;
                Ok(Values::Same(one.pop().flatten()))
            }
            None => Err(wrong_call(self.function, format!("lacks its argument {}", index + 1))),
        }
    }
}

/// Types are settled when a query is planned; a host that calls functions by hand may not have done so.
fn unexpected(array: &ArrayRef) -> String {
    format!("came with type {}, to which it should have been brought before the call", array.data_type())
}
