//! Civil dates and day numbers.
//!
//! The two conversions are Howard Hinnant's (2021), *chrono-Compatible Low-Level Date Algorithms*,
//! sections `days_from_civil` and `civil_from_days`: the year is taken to start on 1 March, so that the
//! leap day is its last day, and 400 years (146,097 days) are one era. They are exact for every `i64` day
//! number here, because the era is split off before the offset of the epoch is added.

/// Days in 400 Gregorian years.
const ERA_DAYS: i64 = 146_097;
/// Days from 0000-03-01 to 1970-01-01.
const EPOCH: i64 = 719_468;

/// A date of the proleptic Gregorian calendar.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Civil {
    /// Astronomical year: 0 is the year before 1.
    pub(super) year: i64,
    /// 1..=12.
    pub(super) month: u32,
    /// 1..=31.
    pub(super) day: u32,
}

impl Civil {
    /// The date of a day number (days since 1970-01-01); exact for every `i64`.
    pub(super) fn from_days(days: i64) -> Self {
        let within = days.rem_euclid(ERA_DAYS) + EPOCH % ERA_DAYS;
        let era = days.div_euclid(ERA_DAYS) + EPOCH / ERA_DAYS + within / ERA_DAYS;
        let day_of_era = within % ERA_DAYS;
        let year_of_era =
            (day_of_era - day_of_era / 1_460 + day_of_era / 36_524 - day_of_era / 146_096) / 365;
        let day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
        let month_from_march = (5 * day_of_year + 2) / 153;
        let day = day_of_year - (153 * month_from_march + 2) / 5 + 1;
        let month = if month_from_march < 10 { month_from_march + 3 } else { month_from_march - 9 };
        // January and February belong to the year that began last March.
        let year = era * 400 + year_of_era + i64::from(month <= 2);
        Self { year, month: month as u32, day: day as u32 }
    }

    /// The date in month `month_index` (see [`Civil::month_index`]) with this day of the month, or with
    /// the month's last day where the month is shorter.
    pub(super) fn in_month(month_index: i64, day: u32) -> Self {
        let year = month_index.div_euclid(12);
        let month = month_index.rem_euclid(12) as u32 + 1;
        Self { year, month, day: day.min(month_length(year, month)) }
    }

    /// Days since 1970-01-01; `None` beyond `i64`.
    pub(super) fn to_days(self) -> Option<i64> {
        let year = if self.month <= 2 { self.year.checked_sub(1)? } else { self.year };
        let year_of_era = year.rem_euclid(400);
        let month_from_march = i64::from((self.month + 9) % 12);
        let day_of_year = (153 * month_from_march + 2) / 5 + i64::from(self.day) - 1;
        let day_of_era = year_of_era * 365 + year_of_era / 4 - year_of_era / 100 + day_of_year;
        let from_epoch =
            i128::from(year.div_euclid(400)) * i128::from(ERA_DAYS) + i128::from(day_of_era - EPOCH);
        i64::try_from(from_epoch).ok()
    }

    /// Months since January of year 0. Years that come from day numbers stay far within `i64`.
    pub(super) fn month_index(self) -> i64 {
        self.year * 12 + i64::from(self.month) - 1
    }

    /// True on the last day of a month.
    pub(super) fn is_month_end(self) -> bool {
        self.day == month_length(self.year, self.month)
    }
}

/// Length in days of the month that a day (days since 1970-01-01) lies in: 28 to 31.
pub fn days_in_month(day: i64) -> u32 {
    let Civil { year, month, .. } = Civil::from_days(day);
    month_length(year, month)
}

/// Length of a month (Gregorian leap rule: every fourth year, but of the centuries only every fourth).
fn month_length(year: i64, month: u32) -> u32 {
    match month {
        2 if year % 4 == 0 && (year % 100 != 0 || year % 400 == 0) => 29,
        2 => 28,
        4 | 6 | 9 | 11 => 30,
        _ => 31,
    }
}
