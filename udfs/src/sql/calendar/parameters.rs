//! What the functions of the calendar take: names, types, and what is said about others.

use std::sync::Arc;

use datafusion::arrow::datatypes::{DataType, Field, IntervalUnit};

use crate::columns::days::has_dates;

/// A parameter of a function.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Parameter {
    /// Its name, for `name => value`.
    pub(super) name: &'static str,
    pub(super) takes: Takes,
    /// What it means, for the reference.
    pub(super) description: &'static str,
    /// Only the last ones of a function may be left out.
    pub(super) optional: bool,
}

/// The kinds of values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Takes {
    /// A DATE or a TIMESTAMP.
    Time,
    /// An INTERVAL.
    Every,
    /// A list of the former.
    Dates,
    /// An integer.
    Year,
}

impl Takes {
    /// The type that a value is brought to before a call sees it; the same type where that is one it knows, and also
    /// where it is one it does not take, which [`Takes::check`] then says better than the engine could.
    ///
    /// A type without values (a bare NULL, an untyped parameter of a prepared statement) becomes the usual one.
    pub(super) fn coerced(self, given: &DataType) -> DataType {
        match (self, given) {
            (_, DataType::Dictionary(_, value)) => self.coerced(value),
            (Self::Time, DataType::Null) => DataType::Date32,
            (Self::Every, DataType::Null | DataType::Interval(_)) => {
                DataType::Interval(IntervalUnit::MonthDayNano)
            }
            (Self::Dates, DataType::Null) => list_of(DataType::Date32),
            (Self::Dates, lists) => match element(lists) {
                // What `[]` is.
                Some(DataType::Null) => list_of(DataType::Date32),
                Some(value)
                    if !matches!(lists, DataType::List(_)) && has_dates(value).is_ok_and(|has| has) =>
                {
                    list_of(value.clone())
                }
                _ => lists.clone(),
            },
            (Self::Year, integer) if integer.is_integer() || integer.is_null() => DataType::Int64,
            (_, other) => other.clone(),
        }
    }

    /// What is wrong with a type, as the end of the sentence "argument 'x' …".
    ///
    /// # Errors
    /// That sentence, with what is taken, for a type that is not, and for a time zone that nobody knows.
    pub(super) fn check(self, given: &DataType) -> Result<(), String> {
        let coerced = self.coerced(given);
        let taken = match self {
            Self::Time => has_dates(&coerced).map_err(|error| error.to_string())?,
            Self::Every => matches!(coerced, DataType::Interval(_)),
            Self::Dates => match element(&coerced) {
                Some(value) => has_dates(value).map_err(|error| error.to_string())?,
                None => false,
            },
            Self::Year => coerced == DataType::Int64,
        };
        let accepted = match self {
            _ if taken => return Ok(()),
            Self::Time => {
                "takes a DATE or a TIMESTAMP (any unit, with or without a time zone), such as a column or DATE '2026-12-01'"
            }
            Self::Every => {
                "takes an INTERVAL of whole months or whole days, such as INTERVAL '1 month' or INTERVAL '7 days'"
            }
            Self::Dates => "takes a list of DATE, such as [DATE '2026-12-25', DATE '2027-01-01']",
            Self::Year => "takes an integer, such as 2026 or date_part('year', week)",
        };
        Err(format!("{accepted}, but has type {given}"))
    }
}

/// The type of the values of a list, whichever way it is stored.
fn element(data_type: &DataType) -> Option<&DataType> {
    match data_type {
        DataType::List(field)
        | DataType::LargeList(field)
        | DataType::FixedSizeList(field, _)
        | DataType::ListView(field)
        | DataType::LargeListView(field) => Some(field.data_type()),
        _ => None,
    }
}

fn list_of(value: DataType) -> DataType {
    DataType::List(Arc::new(Field::new_list_field(value, true)))
}
