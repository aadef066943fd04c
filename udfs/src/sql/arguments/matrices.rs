//! The matrices of `state_space`, from lists of numbers.
//!
//! A matrix is a list of its rows. Where it can only be one thing, a flat list will do: a single column for `r`, a diagonal for `q` and
//! `p1`, the only row of a matrix with one. NULL leaves an element open.

use datafusion::error::Result;
use stillwell_statespace::{GeneralForm, MOST_STATES};

use super::constant::{Given, Value};
use super::settings::Values;
use crate::sql::error::{bad_argument, bad_request};

/// What a flat list stands for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Flat {
    Column,
    Diagonal,
    Row,
}

impl Values<'_> {
    /// Numbers of states and disturbances, which decide the columns of the result.
    ///
    /// # Errors
    /// As [`Self::form`], as far as `z`, `r` and `q` are concerned.
    pub(crate) fn form_size(&self) -> Result<(usize, usize)> {
        let m = self.open_vector("z")?.unwrap_or_default().len();
        if m == 0 || m > MOST_STATES {
            let what = format!("needs one number per state, from 1 to {MOST_STATES} of them, but has {m}");
            return Err(bad_argument(self.caller, "z", what));
        }
        let g = match self.given("r").and_then(Given::value) {
            None => m,
            Some(value) => self.columns_of_r(&value, m)?,
        };
        Ok((m, g))
    }

    /// The whole system.
    ///
    /// # Errors
    /// What is not a list of numbers or not of the right shape, and whatever [`GeneralForm::check`] refuses.
    pub(crate) fn form(&self, drivers: &[String]) -> Result<GeneralForm> {
        let (m, g) = self.form_size()?;
        let closed = |name: &str, values: Vec<Option<f64>>| {
            let numbers = values.into_iter().collect::<Option<Vec<f64>>>();
            numbers.ok_or_else(|| bad_argument(self.caller, name, "needs a number in every place, no NULL"))
        };
        let identity = |size: usize| {
            let place = move |at: usize| Some(f64::from(u8::from(at / size == at % size)));
            (0..size * size).map(place).collect::<Vec<_>>()
        };
        let all_open = (0..g * g).map(|at| if at / g == at % g { None } else { Some(0.0) }).collect();
        let form = GeneralForm {
            z: self.open_vector("z")?.unwrap_or_default(),
            t: closed("t", self.matrix("t", m, m, Flat::Row)?.unwrap_or_default())?,
            r: closed("r", self.matrix("r", m, g, Flat::Column)?.unwrap_or_else(|| identity(m)))?,
            h: self.open_number("h")?,
            q: self.matrix("q", g, g, Flat::Diagonal)?.unwrap_or(all_open),
            a1: closed("a1", self.open_vector("a1")?.unwrap_or_default())?,
            p1: self.matrix("p1", m, m, Flat::Diagonal)?.unwrap_or_default(),
            c: closed("c", self.open_vector("c")?.unwrap_or_default())?,
            d: self.open_number("d")?.unwrap_or(0.0),
            drivers: drivers.to_vec(),
        };
        form.check().map_err(|bad| bad_request(self.caller, &bad))?;
        Ok(form)
    }

    /// A number, or NULL; absent is NULL.
    fn open_number(&self, name: &str) -> Result<Option<f64>> {
        match self.given(name).and_then(Given::value) {
            None | Some(Value::Null) => Ok(None),
            Some(value) => value.as_number().map(Some).ok_or_else(|| self.wrong(name, &value)),
        }
    }

    /// A list of numbers and NULLs; one number is a list of one.
    fn open_vector(&self, name: &str) -> Result<Option<Vec<Option<f64>>>> {
        let Some(value) = self.given(name).and_then(Given::value) else { return Ok(None) };
        self.numbers(name, &value).map(Some)
    }

    fn numbers(&self, name: &str, value: &Value) -> Result<Vec<Option<f64>>> {
        let number = |item: &Value| match item {
            Value::Null => Ok(None),
            item => item.as_number().map(Some).ok_or_else(|| self.wrong(name, value)),
        };
        value.as_items().iter().map(number).collect()
    }

    /// A matrix, row by row.
    fn matrix(
        &self,
        name: &str,
        rows: usize,
        columns: usize,
        flat: Flat,
    ) -> Result<Option<Vec<Option<f64>>>> {
        let Some(value) = self.given(name).and_then(Given::value) else { return Ok(None) };
        let items = value.as_items();
        if items.iter().any(|item| matches!(item, Value::List(_))) {
            let mut matrix = Vec::with_capacity(rows * columns);
            for row in items {
                let row = self.numbers(name, row)?;
                if row.len() != columns {
                    let what =
                        format!("needs rows of {columns} number(s), but one has {}: {value}", row.len());
                    return Err(bad_argument(self.caller, name, what));
                }
                matrix.extend(row);
            }
            return match matrix.len() == rows * columns {
                true => Ok(Some(matrix)),
                false => {
                    let what = format!("needs {rows} row(s), but has {}: {value}", items.len());
                    Err(bad_argument(self.caller, name, what))
                }
            };
        }
        let numbers = self.numbers(name, &value)?;
        let fits = match flat {
            Flat::Column => columns == 1 && numbers.len() == rows,
            Flat::Row => rows == 1 && numbers.len() == columns,
            Flat::Diagonal => numbers.len() == rows,
        };
        if !fits {
            let short = match flat {
                Flat::Diagonal => format!(", or its diagonal of {rows}"),
                Flat::Column | Flat::Row => String::new(),
            };
            let what = format!(
                "needs {rows} row(s) of {columns} number(s), such as [[1.0, 0.0], [0.0, 1.0]]{short}, not {value}"
            );
            return Err(bad_argument(self.caller, name, what));
        }
        if flat != Flat::Diagonal {
            return Ok(Some(numbers));
        }
        let place = |at: usize| if at / rows == at % rows { numbers[at / rows] } else { Some(0.0) };
        Ok(Some((0..rows * rows).map(place).collect()))
    }

    /// Disturbances that `r` has: columns of its rows, or one where it is a flat list.
    fn columns_of_r(&self, value: &Value, m: usize) -> Result<usize> {
        match value.as_items().first() {
            Some(Value::List(row)) => Ok(row.len()),
            Some(_) if value.as_items().len() == m => Ok(1),
            _ => Err(self.wrong("r", value)),
        }
    }
}
