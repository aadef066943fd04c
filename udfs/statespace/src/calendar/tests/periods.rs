//! Periods against numpy and python-dateutil, and against counting day by day.

use super::*;
use proptest::prelude::*;

/// Periods between 1600 and 2400, month ends and leap days among them; `tests/data/calendar/reference.py` made it with
/// numpy 2.4.6 and python-dateutil 4.0.0.
const REFERENCE: &str = include_str!("../../../tests/data/calendar/periods.csv");

/// The day number of `2024-02-29`.
fn parsed(date: &str) -> i64 {
    let parts: Vec<i64> = date.split('-').map(|part| part.parse().unwrap()).collect();
    let [year, month, of_month] = parts[..] else { panic!("a date, not '{date}'") };
    day(year, month as u32, of_month as u32)
}

#[test]
fn as_numpy_and_dateutil_have_it() {
    let mut rows = 0;
    for line in REFERENCE.lines().skip(1) {
        let fields: Vec<&str> = line.split(',').collect();
        let [first, unit, length, end, month_length, weekdays @ .., holidays, dates, working_days] =
            &fields[..]
        else {
            panic!("a row of the table, not '{line}'")
        };
        let every = match *unit {
            "months" => Step::Months(length.parse().unwrap()),
            _ => Step::Every(length.parse().unwrap()),
        };
        let period = Period::starting(parsed(first), every).unwrap();
        let listed: Dates = holidays.split_whitespace().map(parsed).collect();
        assert_eq!(period.end(), parsed(end), "{line}");
        assert_eq!(days_in_month(parsed(first)).to_string(), *month_length, "{line}");
        assert_eq!(period.weekday_counts().map(|count| count.to_string())[..], *weekdays, "{line}");
        assert_eq!(listed.within(period).len().to_string(), *dates, "{line}");
        assert_eq!(period.working_days(&listed).to_string(), *working_days, "{line}");
        rows += 1;
    }
    assert_eq!(rows, 187);
}

#[test]
fn a_month_that_lacks_the_day_ends_on_its_last() {
    // As PostgreSQL's date + interval; the days themselves are plain calendar facts.
    let end = |first, months| Period::starting(first, Step::Months(months)).unwrap().end();
    assert_eq!(end(day(2023, 1, 31), 1), day(2023, 2, 28));
    assert_eq!(end(day(2024, 1, 31), 1), day(2024, 2, 29));
    assert_eq!(end(day(2024, 2, 29), 12), day(2025, 2, 28));
    assert_eq!(end(day(2024, 2, 29), 48), day(2028, 2, 29));
    assert_eq!(end(day(1899, 12, 31), 2), day(1900, 2, 28));
}

#[test]
fn what_does_not_lead_forward_or_leaves_the_range_is_no_period() {
    for every in [Step::Every(0), Step::Every(-7), Step::Every(i64::MIN), Step::Months(0)] {
        assert_eq!(Period::starting(0, every), None, "{every:?}");
    }
    assert_eq!(Period::starting(i64::MAX, Step::Every(1)), None);
    assert_eq!(Period::starting(i64::MAX - 20, Step::Months(1)), None);
    assert_eq!(Period::starting(i64::MAX - 1, Step::Every(1)).unwrap().days(), 1);
    let longest = Period::starting(i64::MIN, Step::Months(u32::MAX)).unwrap();
    // 2^32 - 1 months are 894,784 cycles of 4,800 months, which are 146,097 days each, and less than one more.
    assert_eq!(longest.days() / 146_097, 894_784);
    assert_eq!(longest.weekday_counts().iter().sum::<i64>(), longest.days());
    assert_eq!(Period::starting(0, Step::Every(i64::MAX)).unwrap().days(), i64::MAX);
}

#[test]
fn holidays_count_once_and_only_where_somebody_would_have_worked() {
    // December 2026 begins on a Tuesday (Python 3: date(2026, 12, 1).weekday() == 1): 23 days from Monday to Friday.
    let december = Period::starting(day(2026, 12, 1), Step::Months(1)).unwrap();
    let working = |dates: &[(i64, u32, u32)]| december.working_days(&days(dates).into_iter().collect());
    assert_eq!(working(&[]), 23);
    assert_eq!(working(&[(2026, 12, 25), (2026, 12, 25)]), 22, "a Friday, twice");
    assert_eq!(working(&[(2026, 12, 26), (2026, 12, 27)]), 23, "a Saturday and a Sunday");
    assert_eq!(working(&[(2026, 11, 30), (2027, 1, 1)]), 23, "the days on either side");
    assert_eq!(working(&[(2026, 12, 31), (2026, 12, 1)]), 21, "the last day and the first, out of order");
}

/// Months up to thirty years, days up to some years.
fn steps() -> impl Strategy<Value = Step> {
    prop_oneof![(1_u32..360).prop_map(Step::Months), (1_i64..2_000).prop_map(Step::Every)]
}

/// The weekday of a day between 1600 and 2400, Monday = 0, by walking from the Monday 1599-12-27
/// (Python 3: date(1599, 12, 27).weekday() == 0), day number -135,145.
fn walked(day: i64) -> usize {
    let mut weekday = 0;
    for _ in -135_145..day {
        weekday = if weekday == 6 { 0 } else { weekday + 1 };
    }
    weekday
}

proptest! {
    #[test]
    fn counting_day_by_day(
        first in -135_140_i64..157_420, every in steps(),
        offsets in prop::collection::vec(-30_i64..2_100, 0..40),
    ) {
        let period = Period::starting(first, every).unwrap();
        let holidays: Dates = offsets.iter().map(|offset| first + offset).collect();
        let mut weekday = walked(first);
        let (mut counts, mut working, mut listed) = ([0; 7], 0, 0);
        for day in period.first()..period.end() {
            let holiday = offsets.contains(&(day - first));
            counts[weekday] += 1;
            working += i64::from(weekday < 5 && !holiday);
            listed += usize::from(holiday);
            weekday = (weekday + 1) % 7;
        }
        prop_assert_eq!(period.weekday_counts(), counts);
        prop_assert_eq!(counts.iter().sum::<i64>(), period.days());
        prop_assert_eq!(period.working_days(&holidays), working);
        prop_assert_eq!(holidays.within(period).len(), listed);
    }

    #[test]
    fn a_month_from_its_first_day_is_that_month(day in -135_140_i64..157_420) {
        let first = day - i64::from(Civil::from_days(day).day) + 1;
        let month = Period::starting(first, Step::Months(1)).unwrap();
        prop_assert_eq!(month.days(), i64::from(days_in_month(day)));
        prop_assert!(month.first() <= day && day < month.end());
    }

    #[test]
    fn neighbouring_periods_share_nothing_and_leave_nothing_out(first in -135_140_i64..157_420, every in steps()) {
        let one = Period::starting(first, every).unwrap();
        let next = Period::starting(one.end(), every).unwrap();
        let both = Period::starting(first, Step::Every(one.days() + next.days())).unwrap();
        for day in 0..7 {
            let apart = one.weekday_counts()[day] + next.weekday_counts()[day];
            prop_assert_eq!(both.weekday_counts()[day], apart);
        }
    }

    #[test]
    fn any_numbers_at_all_do_no_harm(first: i64, days: i64, months: u32, listed in prop::collection::vec(any::<i64>(), 0..9)) {
        let listed: Dates = listed.into_iter().collect();
        for every in [Step::Every(days), Step::Months(months)] {
            if let Some(period) = Period::starting(first, every) {
                let counts = period.weekday_counts();
                prop_assert_eq!(counts.iter().map(|&count| i128::from(count)).sum::<i128>(), i128::from(period.days()));
                prop_assert!(counts.iter().max().unwrap() - counts.iter().min().unwrap() <= 1);
                prop_assert!(period.working_days(&listed) <= period.days());
            }
        }
        prop_assert!((28..=31).contains(&days_in_month(first)));
    }
}
