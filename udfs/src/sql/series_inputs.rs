//! A series as the arguments `(at, observed [, options [, drivers]])` of a function in an expression: what their types say, and their rows in
//! order of time.

use std::borrow::Borrow;

use datafusion::arrow::array::ArrayRef;
use datafusion::arrow::datatypes::DataType;
use datafusion::error::{DataFusionError, Result};

use super::arguments::options::OptionSet;
use super::error::{Caller, bad_argument};
use crate::columns::groups::{Group, Groups, Rows};
use crate::columns::time::TimeKind;
use crate::columns::{driver_struct, numbers};

/// Names of the arguments, for `name => value`.
pub(super) const NAMES: [&str; 4] = ["at", "observed", "options", "drivers"];

/// What the types of the arguments say.
#[derive(Debug, Clone)]
pub(super) struct SeriesInputs {
    function: &'static str,
    pub(super) time: TimeKind,
    /// Names of the drivers, in the order of their struct.
    pub(super) drivers: Vec<String>,
}

/// Columns of some rows, in the order in which they came.
#[derive(Debug, Default, Clone)]
pub(super) struct SeriesRows {
    pub(super) times: Vec<Option<i64>>,
    pub(super) observed: Vec<f64>,
    /// In the order that was asked for.
    pub(super) drivers: Vec<Vec<f64>>,
}

impl SeriesInputs {
    /// # Errors
    /// Types that an argument does not take, options that are none.
    pub(super) fn of<T: Borrow<DataType>>(options: OptionSet, types: &[T]) -> Result<Self> {
        let data_type = |at: usize| types.get(at).map_or(&DataType::Null, Borrow::borrow);
        let caller = Caller::Expression(options.function);
        let time =
            TimeKind::try_new(data_type(0)).map_err(|error| bad_argument(caller, "at", error.to_string()))?;
        if !numbers::is_number(data_type(1)) {
            let what = format!("takes {}, but has type {}", numbers::OBSERVED_TYPES, data_type(1));
            return Err(bad_argument(caller, "observed", what));
        }
        options.check_type(data_type(2))?;
        let drivers =
            driver_struct::names(data_type(3)).map_err(|what| bad_argument(caller, "drivers", what))?;
        Ok(Self { function: options.function, time, drivers })
    }

    /// The rows of a batch; `drivers` in the order in which they are wanted.
    ///
    /// # Errors
    /// Times beyond a signed 64-bit integer, arguments that are missing.
    pub(super) fn read<'a>(
        &self,
        values: &[ArrayRef],
        drivers: impl IntoIterator<Item = &'a String>,
    ) -> Result<SeriesRows> {
        let argument = |at: usize| {
            let missing =
                || DataFusionError::Internal(format!("{}: argument {at} is missing", self.function));
            values.get(at).ok_or_else(missing)
        };
        let wrong = |error: crate::columns::ColumnError| {
            bad_argument(Caller::Expression(self.function), "at", error.to_string())
        };
        Ok(SeriesRows {
            times: self.time.read(argument(0)?).map_err(wrong)?,
            observed: numbers::to_f64(argument(1)?)?,
            drivers: match values.get(3) {
                Some(column) => driver_struct::values(column, drivers)?,
                None => Vec::new(),
            },
        })
    }

    /// A series in words; a function in an expression is not told its key.
    pub(super) fn describe(&self, group: &Group) -> String {
        let format = |time: &i64| self.time.axis().format(*time);
        let mut times = group.times.iter().flatten();
        match (times.next().map(format), times.next_back().map(format)) {
            (Some(first), Some(last)) => format!("of {} rows from {first} to {last}", group.len()),
            (Some(only), None) => format!("of {} rows at {only}", group.len()),
            (None, _) => String::new(),
        }
    }
}

impl SeriesRows {
    /// Bytes that they hold.
    pub(super) fn bytes(&self) -> usize {
        let numbers = self.observed.capacity() + self.drivers.iter().map(Vec::capacity).sum::<usize>();
        size_of::<Self>() + self.times.capacity() * size_of::<Option<i64>>() + numbers * size_of::<f64>()
    }

    /// The rows in order of time, NULLs last, and where each of them stood; no group without rows. `distinct`: rows that are the same in
    /// every column count once.
    ///
    /// # Errors
    /// None that a value could cause.
    pub(super) fn sorted(&self, distinct: bool) -> Result<(Option<Group>, Vec<usize>)> {
        let time = |row: usize| self.times[row].map_or((true, 0), |time| (false, time));
        let bits = |row: usize| {
            let drivers = self.drivers.iter().map(move |values| values[row].to_bits());
            std::iter::once(self.observed[row].to_bits()).chain(drivers)
        };
        let mut order = (0..self.times.len()).collect::<Vec<_>>();
        // Equal times too have one order, whatever order their rows came in.
        order.sort_by(|&a, &b| time(a).cmp(&time(b)).then_with(|| bits(a).cmp(bits(b))));
        if distinct {
            order.dedup_by(|a, b| time(*a) == time(*b) && bits(*a).eq(bits(*b)));
        }
        let pick = |values: &[f64]| order.iter().map(|&row| values[row]).collect();
        let mut groups = Groups::try_new(&[])?;
        groups.push(Rows {
            keys: Vec::new(),
            times: order.iter().map(|&row| self.times[row]).collect(),
            observed: pick(&self.observed),
            drivers: self.drivers.iter().map(|values| pick(values)).collect(),
        })?;
        groups.close();
        Ok((groups.pop(), order))
    }
}
