//! The calendar of the demo: Mondays as days since 1970-01-01, and the public holidays of Ostrel.
//!
//! Ostrel is invented, and so are its holidays. A week (Monday to Sunday) counts as a holiday week when it
//! holds at least one of these days:
//!
//! | holiday | day |
//! |---|---|
//! | New Year | 1 January |
//! | Long Table | a Sunday that moves: the first Sunday of March plus (3 x year mod 5) weeks |
//! | Founders' Day | 9 June |
//! | Harvest Home | the last Saturday of September |
//! | Midwinter | 21 and 22 December |
//!
//! Long Table moves by up to four weeks, so that no seasonal pattern can stand in for it.

/// Days since 1970-01-01 of a date in the Gregorian calendar.
///
/// `month` 1 to 12, `day` 1 to 31. Source: H. Hinnant, "chrono-Compatible Low-Level Date Algorithms",
/// `days_from_civil`, from memory; the tests hold it against known dates.
pub(super) fn day_number(year: i32, month: i32, day: i32) -> i32 {
    let year = if month <= 2 { year - 1 } else { year };
    let era = year.div_euclid(400);
    let year_of_era = year.rem_euclid(400);
    let day_of_year = (153 * ((month + 9) % 12) + 2) / 5 + day - 1;
    let day_of_era = year_of_era * 365 + year_of_era / 4 - year_of_era / 100 + day_of_year;
    era * 146_097 + day_of_era - 719_468
}

/// Year, month and day of a day number: the inverse of [`day_number`], same source.
pub(super) fn civil(day_number: i32) -> (i32, i32, i32) {
    let shifted = day_number + 719_468;
    let era = shifted.div_euclid(146_097);
    let day_of_era = shifted.rem_euclid(146_097);
    let year_of_era = (day_of_era - day_of_era / 1_460 + day_of_era / 36_524 - day_of_era / 146_096) / 365;
    let day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    let shifted_month = (5 * day_of_year + 2) / 153;
    let day = day_of_year - (153 * shifted_month + 2) / 5 + 1;
    let month = if shifted_month < 10 { shifted_month + 3 } else { shifted_month - 9 };
    let year = year_of_era + era * 400 + i32::from(month <= 2);
    (year, month, day)
}

/// A day number as ISO text, `2025-12-22`.
pub(super) fn iso(day_number: i32) -> String {
    let (year, month, day) = civil(day_number);
    format!("{year:04}-{month:02}-{day:02}")
}

/// Days since the last Monday: 0 on a Monday, 6 on a Sunday (1970-01-01 was a Thursday).
fn weekday(day_number: i32) -> i32 {
    (day_number + 3).rem_euclid(7)
}

/// The first day on or after `from` that falls on `wanted` (0 = Monday).
fn on_or_after(from: i32, wanted: i32) -> i32 {
    from + (wanted - weekday(from)).rem_euclid(7)
}

/// The six public holidays of one year, as day numbers in order.
fn of_year(year: i32) -> [i32; 6] {
    const SATURDAY: i32 = 5;
    const SUNDAY: i32 = 6;
    [
        day_number(year, 1, 1),
        on_or_after(day_number(year, 3, 1), SUNDAY) + 7 * (3 * year).rem_euclid(5),
        day_number(year, 6, 9),
        on_or_after(day_number(year, 9, 24), SATURDAY),
        day_number(year, 12, 21),
        day_number(year, 12, 22),
    ]
}

/// Whether the week that starts on this Monday holds a public holiday.
pub(super) fn holds_holiday(monday: i32) -> bool {
    let (first, _, _) = civil(monday);
    let (last, _, _) = civil(monday + 6);
    (first..=last).flat_map(of_year).any(|day| (monday..monday + 7).contains(&day))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn day_numbers_agree_with_known_dates() {
        // GNU date: echo $(( $(date -u -d 2022-01-03 +%s) / 86400 )), and so on for the others.
        for (date, number) in [
            ((1970, 1, 1), 0),
            ((2000, 2, 29), 11_016),
            ((2022, 1, 3), 18_995),
            ((2025, 12, 22), 20_444),
            ((1899, 12, 31), -25_568),
        ] {
            let (year, month, day) = date;
            assert_eq!(day_number(year, month, day), number, "{date:?}");
            assert_eq!(civil(number), date, "{number}");
        }
        assert_eq!(iso(18_995), "2022-01-03");
    }

    #[test]
    fn every_day_of_eight_centuries_comes_back() {
        for number in day_number(1600, 1, 1)..day_number(2400, 1, 1) {
            let (year, month, day) = civil(number);
            assert_eq!(day_number(year, month, day), number);
        }
    }

    #[test]
    fn holidays_fall_on_the_days_the_rule_names() {
        for year in 1990..2060 {
            let days = of_year(year);
            assert!(days.is_sorted(), "{year}");
            assert_eq!(weekday(days[1]), 6, "Long Table {year} is a Sunday");
            assert_eq!(weekday(days[3]), 5, "Harvest Home {year} is a Saturday");
            assert_eq!(civil(days[3] + 7).1, 10, "Harvest Home {year} is September's last Saturday");
        }
        let tables: Vec<String> = (2022..2026).map(|year| iso(of_year(year)[1])).collect();
        // By the calendar: first Sundays of March 6, 5, 3, 2; plus 3 x year mod 5 = 1, 4, 2, 0 weeks.
        assert_eq!(tables, ["2022-03-13", "2023-04-02", "2024-03-17", "2025-03-02"]);
    }

    #[test]
    fn a_week_that_crosses_the_year_looks_at_both_years() {
        assert!(holds_holiday(day_number(2024, 12, 30)), "holds 1 January 2025");
        assert!(holds_holiday(day_number(2025, 12, 22)), "holds 22 December");
        assert!(!holds_holiday(day_number(2025, 1, 6)));
    }
}
