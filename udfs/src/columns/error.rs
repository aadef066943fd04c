//! What can be wrong with a column or a value that goes with one, said to the person who wrote the query.

use std::fmt;

use arrow::datatypes::DataType;

/// A column that cannot be used: rule, value and remedy. Where it stands is added by whoever knows its name.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum ColumnError {
    /// A type that is no time.
    NotATime { found: DataType },
    /// A time zone that nobody knows.
    UnknownZone { zone: String },
    /// A time beyond a signed 64-bit integer; `what` is arrow's own sentence with the value.
    BeyondRange { what: String },
    /// An instant so far away that no time zone has a wall clock for it.
    NoWallClock { instant: String },
    /// A grid step that does not go with the time column.
    WrongStep { given: String, why: &'static str, accepted: &'static str },
}

impl fmt::Display for ColumnError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NotATime { found } => write!(
                f,
                "takes a DATE, a TIMESTAMP (any unit, with or without a time zone) or an integer, but has type {found}; \
                 cast it, for instance CAST(week AS DATE)"
            ),
            Self::UnknownZone { zone } => write!(
                f,
                "has the time zone '{zone}', which is neither an offset such as '+01:00' nor a zone of the IANA \
                 database such as 'Europe/Berlin'; cast it to a TIMESTAMP with one of these"
            ),
            Self::BeyondRange { what } => {
                write!(f, "must fit in a signed 64-bit integer ({what}); filter such rows out")
            }
            Self::NoWallClock { instant } => write!(
                f,
                "holds {instant}, which is beyond the years that time zones are known for; filter such rows out"
            ),
            Self::WrongStep { given, why, accepted } => write!(f, "{given} {why}; {accepted}"),
        }
    }
}

impl std::error::Error for ColumnError {}
