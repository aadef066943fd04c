//! Instants and local times of one zone.
//!
//! Both are ticks since 1970-01-01T00:00:00, the one of UTC, the other of the wall clock. An instant has
//! exactly one local time. A local time may have no instant (clocks go forward) or two (clocks go back);
//! [`Zone::instant`] then follows RFC 5545, section 3.3.5: the offset in force before the gap, and the first
//! of the two.

use arrow::array::timezone::Tz;
use chrono::{DateTime, MappedLocalTime, NaiveDateTime, Offset, TimeDelta, TimeZone};

use super::error::ColumnError;

/// A time zone: an IANA name or a fixed offset.
#[derive(Debug, Clone, Copy)]
pub(super) struct Zone(Tz);

impl Zone {
    /// # Errors
    /// [`ColumnError::UnknownZone`].
    pub(super) fn try_new(name: &str) -> Result<Self, ColumnError> {
        name.parse().map(Self).map_err(|_| ColumnError::UnknownZone { zone: name.to_owned() })
    }

    /// The local time of an instant; `None` beyond `i64` or some 260,000 years from now.
    pub(super) fn local(self, instant: i64, per_second: i64) -> Option<i64> {
        let offset = self.offset_at(date_time(instant, per_second)?);
        instant.checked_add(offset.checked_mul(per_second)?)
    }

    /// The instant of a local time by the rule above, and whether that local time exists at all.
    pub(super) fn instant(self, local: i64, per_second: i64) -> Option<(i64, bool)> {
        let at = date_time(local, per_second)?;
        let seconds = |offset: &<Tz as TimeZone>::Offset| i64::from(offset.fix().local_minus_utc());
        let (offset, exists) = match self.0.offset_from_local_datetime(&at) {
            MappedLocalTime::Single(offset) => (seconds(&offset), true),
            // The further a clock is ahead of UTC, the earlier the instant.
            MappedLocalTime::Ambiguous(one, other) => (seconds(&one).max(seconds(&other)), true),
            // Read as UTC, the local time a day ago is 10 to 38 hours before the gap: surely before it.
            MappedLocalTime::None => (self.offset_at(at.checked_sub_signed(TimeDelta::days(1))?), false),
        };
        Some((local.checked_sub(offset.checked_mul(per_second)?)?, exists))
    }

    /// Seconds that local time is ahead of UTC at an instant.
    fn offset_at(self, instant: NaiveDateTime) -> i64 {
        i64::from(self.0.offset_from_utc_datetime(&instant).fix().local_minus_utc())
    }
}

/// Ticks as a date and time; fractions of a second never matter to an offset.
fn date_time(ticks: i64, per_second: i64) -> Option<NaiveDateTime> {
    DateTime::from_timestamp(ticks.div_euclid(per_second), 0).map(|at| at.naive_utc())
}

#[cfg(test)]
mod tests;
