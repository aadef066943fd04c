//! The distance between two grid points: its name and the seasons it suggests.

use super::axis::Axis;

/// Nanoseconds in a day, as the unit table below needs them.
const DAY: i128 = 86_400_000_000_000;

/// The units a fixed step is named in, longest first, in nanoseconds.
const UNITS: [(i128, &str); 8] = [
    (7 * DAY, "week"),
    (DAY, "day"),
    (3_600_000_000_000, "hour"),
    (60_000_000_000, "minute"),
    (1_000_000_000, "second"),
    (1_000_000, "millisecond"),
    (1_000, "microsecond"),
    (1, "nanosecond"),
];

/// Distance from one grid point to the next.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Step {
    /// A fixed number of axis units (days, ticks or plain counts), at least 1.
    Every(i64),
    /// Calendar months, at least 1: 1 = month, 3 = quarter, 12 = year.
    Months(u32),
}

impl Step {
    /// The step in words: 'week', '15 minutes', 'quarter', '2 years', and 'step 5' on an integer axis.
    pub(super) fn describe(self, axis: Axis) -> String {
        match self {
            Self::Months(3) => "quarter".to_owned(),
            Self::Months(n) if n % 12 == 0 => count(i128::from(n / 12), "year"),
            Self::Months(n) => count(i128::from(n), "month"),
            Self::Every(n) => {
                let Some(nanos) = axis.unit_nanos().map(|unit| unit * i128::from(n)) else {
                    return format!("step {n}");
                };
                UNITS
                    .iter()
                    .find(|(unit, _)| nanos % unit == 0)
                    .map_or_else(|| format!("step {n}"), |(unit, name)| count(nanos / unit, name))
            }
        }
    }

    /// The seasonal periods, in steps, that are worth a look where nobody named one; most telling first.
    ///
    /// Up to a day: the day, then the week. From a day on: the week, then the year of 365.25 days. Months:
    /// the year. A period counts when it is a whole number of at least 2 steps, or at least 4 steps
    /// (a fractional period needs harmonics, and a shorter one leaves no room for them). Steps under a minute
    /// suggest none, since a day of them is more than a seasonal pattern can carry; nor do plain counts and years.
    pub(super) fn periods(self, axis: Axis) -> Vec<f64> {
        let candidates = match self {
            Self::Months(n) => return if n < 12 && 12 % n == 0 { vec![f64::from(12 / n)] } else { vec![] },
            Self::Every(n) => match axis.unit_nanos().map(|unit| unit * i128::from(n)) {
                Some(nanos) if nanos >= DAY => {
                    let days = nanos as f64 / DAY as f64;
                    // Two decimals (52.18), so that the period as printed, and named, is the period as used.
                    [7.0 / days, (36_525.0 / days).round() / 100.0]
                }
                Some(nanos) if nanos >= 60_000_000_000 => {
                    let steps = DAY as f64 / nanos as f64;
                    [steps, 7.0 * steps]
                }
                _ => return vec![],
            },
        };
        let whole = |period: f64| (period - period.round()).abs() < 1e-9;
        candidates.into_iter().filter(|&period| period >= 4.0 || (period >= 2.0 && whole(period))).collect()
    }
}

/// "week" for one, "2 weeks" for more.
fn count(n: i128, unit: &str) -> String {
    if n == 1 { unit.to_owned() } else { format!("{n} {unit}s") }
}
