//! What the integers of a time axis count, and how such a time is written.

use super::civil::Civil;

/// What the integers of the time axis count.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Axis {
    /// Days since 1970-01-01.
    Days,
    /// Ticks of a wall clock since 1970-01-01T00:00:00, every day being 24 hours long.
    Ticks {
        /// Ticks in one second: 1, 1,000, 1,000,000 or 1,000,000,000.
        per_second: i64,
    },
    /// Ticks on the line of instants since 1970-01-01T00:00:00Z. Same arithmetic as [`Axis::Ticks`]; such
    /// times are written with a `Z`, so that nobody takes them for local time.
    Instants {
        /// Ticks in one second.
        per_second: i64,
    },
    /// Plain numbers, such as a period counter or a year.
    Integer,
}

impl Axis {
    /// Axis units in a day; `None` on [`Axis::Integer`].
    pub(super) fn per_day(self) -> Option<i64> {
        match self {
            Self::Days => Some(1),
            Self::Ticks { per_second } | Self::Instants { per_second } => {
                Some(per_second.max(1).saturating_mul(86_400))
            }
            Self::Integer => None,
        }
    }

    /// Length of one axis unit in nanoseconds; `None` on [`Axis::Integer`] and where it is no whole number.
    pub(super) fn unit_nanos(self) -> Option<i128> {
        match self {
            Self::Days => Some(86_400_000_000_000),
            Self::Ticks { per_second } | Self::Instants { per_second } => {
                let per_second = i128::from(per_second.max(1));
                (1_000_000_000 % per_second == 0).then(|| 1_000_000_000 / per_second)
            }
            Self::Integer => None,
        }
    }

    /// A time as its civil date and the units since that midnight; `None` on [`Axis::Integer`].
    pub(super) fn split(self, time: i64) -> Option<(Civil, i64)> {
        let per_day = self.per_day()?;
        Some((Civil::from_days(time.div_euclid(per_day)), time.rem_euclid(per_day)))
    }

    /// The inverse of [`Axis::split`]; `None` beyond `i64` and on [`Axis::Integer`].
    pub(super) fn join(self, date: Civil, of_day: i64) -> Option<i64> {
        let time = i128::from(date.to_days()?) * i128::from(self.per_day()?) + i128::from(of_day);
        i64::try_from(time).ok()
    }

    /// A time as people write it: `2024-03-31`, `2024-03-31T06:00:00`, with a `Z` on the line of instants
    /// (ISO 8601; years beyond four digits with their sign), or the bare integer.
    pub fn format(self, time: i64) -> String {
        let Some((Civil { year, month, day }, of_day)) = self.split(time) else {
            return time.to_string();
        };
        let year = if (0..=9_999).contains(&year) { format!("{year:04}") } else { format!("{year:+05}") };
        let date = format!("{year}-{month:02}-{day:02}");
        let (per_second, zone) = match self {
            Self::Days | Self::Integer => return date,
            Self::Ticks { per_second } => (per_second.max(1), ""),
            Self::Instants { per_second } => (per_second.max(1), "Z"),
        };
        let second = of_day / per_second;
        let nanos = i128::from(of_day % per_second) * 1_000_000_000 / i128::from(per_second);
        let fraction = match nanos {
            0 => String::new(),
            n if n % 1_000_000 == 0 => format!(".{:03}", n / 1_000_000),
            n if n % 1_000 == 0 => format!(".{:06}", n / 1_000),
            n => format!(".{n:09}"),
        };
        let (hour, minute, second) = (second / 3_600, second / 60 % 60, second % 60);
        format!("{date}T{hour:02}:{minute:02}:{second:02}{fraction}{zone}")
    }
}
