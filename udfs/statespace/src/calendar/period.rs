//! A stretch of days, and the weekdays in it.

use super::civil::Civil;
use super::dates::Dates;
use super::step::Step;

/// Weekdays from Monday on that are worked.
const WORKED: usize = 5;

/// The days from a first one on, up to but without the day that ends the stretch.
///
/// Days are day numbers: days since 1970-01-01, a Thursday.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Period {
    first: i64,
    end: i64,
}

impl Period {
    /// The period that starts on a day and lasts a step; [`Step::Every`] counts days here.
    ///
    /// Months later is the same day of the month, or the last day of a month that is too short for it, as in SQL's
    /// `date + INTERVAL '1 month'`: a month from 31 January 2023 ends on 28 February. `None` for a step that does
    /// not lead forward, and beyond `i64`.
    pub fn starting(first: i64, every: Step) -> Option<Self> {
        let end = match every {
            Step::Every(days) => first.checked_add(days)?,
            Step::Months(months) => {
                let date = Civil::from_days(first);
                Civil::in_month(date.month_index() + i64::from(months), date.day).to_days()?
            }
        };
        (end > first).then_some(Self { first, end })
    }

    /// Its first day.
    pub fn first(self) -> i64 {
        self.first
    }

    /// The day after its last.
    pub fn end(self) -> i64 {
        self.end
    }

    /// How many days it has, at least 1.
    pub fn days(self) -> i64 {
        self.end - self.first
    }

    /// How often each weekday falls in it, Monday first. The seven add up to [`Period::days`].
    pub fn weekday_counts(self) -> [i64; 7] {
        let (weeks, rest) = (self.days() / 7, (self.days() % 7) as usize);
        let first = weekday(self.first);
        // The days beyond whole weeks are the first `rest` weekdays from that of the first day on.
        std::array::from_fn(|day| weeks + i64::from((day + 7 - first) % 7 < rest))
    }

    /// Mondays to Fridays in it, less the holidays that fall on one.
    pub fn working_days(self, holidays: &Dates) -> i64 {
        let worked: i64 = self.weekday_counts().iter().take(WORKED).sum();
        let off = holidays.within(self).iter().filter(|&&day| weekday(day) < WORKED).count();
        worked - off as i64
    }
}

/// Days since the last Monday: 0 on a Monday, 6 on a Sunday. Day number 0 is a Thursday.
fn weekday(day: i64) -> usize {
    ((day.rem_euclid(7) + 3) % 7) as usize
}
