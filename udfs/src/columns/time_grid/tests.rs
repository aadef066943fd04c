//! Zoned series across clock changes. Dates of the changes: see the tests of the zone.

use arrow::datatypes::{DataType, TimeUnit};
use chrono::{Days, NaiveDate, NaiveDateTime, NaiveTime};
use proptest::prelude::*;

use super::*;

fn kind(unit: TimeUnit, zone: &str) -> TimeKind {
    TimeKind::try_new(&DataType::Timestamp(unit, Some(zone.into()))).unwrap()
}

fn date_time(text: &str) -> NaiveDateTime {
    NaiveDateTime::parse_from_str(text, "%Y-%m-%d %H:%M").unwrap()
}

/// UTC seconds of `2024-03-31 02:30`.
fn utc(text: &str) -> i64 {
    date_time(text).and_utc().timestamp()
}

/// UTC seconds of a local date and time.
fn instant(zone: &str, local: NaiveDateTime) -> i64 {
    Zone::try_new(zone).unwrap().instant(local.and_utc().timestamp(), 1).unwrap().0
}

/// UTC seconds of the same local time on `n` days running.
fn daily(zone: &str, first: &str, n: u64) -> Vec<i64> {
    (0..n).map(|i| instant(zone, date_time(first) + Days::new(i))).collect()
}

fn found(zone: &str, stored: &[i64]) -> TimeGrid {
    kind(TimeUnit::Second, zone).grid(stored, None).unwrap_or_else(|trouble| panic!("{trouble}"))
}

/// Every stored time has its point and every point its stored time.
fn assert_exact(grid: &TimeGrid, stored: &[i64]) {
    for (index, &time) in stored.iter().enumerate() {
        assert_eq!((grid.index_of(time), grid.time_at(index)), (Some(index), Some(time)));
    }
}

#[test]
fn midnights_of_a_year_are_days() {
    for zone in ["Europe/Berlin", "America/New_York", "UTC", "+05:30"] {
        let year = daily(zone, "2024-01-01 00:00", 366);
        let grid = found(zone, &year);
        assert_eq!(grid.grid().describe(), "day");
        assert_exact(&grid, &year);
        // The forecast goes on at midnight, across the next change of the clocks.
        let next_summer = instant(zone, date_time("2025-07-01 00:00"));
        assert_eq!(grid.time_at(366 + 181), Some(next_summer));
        assert_eq!(grid.format(next_summer), "2025-07-01T00:00:00");
    }
}

#[test]
fn weeks_months_and_month_ends_by_the_wall_clock() {
    let zone = "Europe/Berlin";
    let weeks: Vec<i64> = daily(zone, "2023-01-02 06:00", 730).into_iter().step_by(7).collect();
    assert_eq!(found(zone, &weeks).grid().describe(), "week");
    let day = |month: u32, day: u32| NaiveDate::from_ymd_opt(2024, month, day).unwrap();
    let midnight = |date: NaiveDate| instant(zone, date.and_time(NaiveTime::MIN));
    let months: Vec<i64> = (1..=12).map(|month| midnight(day(month, 1))).collect();
    assert_eq!(found(zone, &months).grid().describe(), "month");
    assert_exact(&found(zone, &months), &months);
    let ends: Vec<i64> = (2..=12).map(|month| midnight(day(month, 1).pred_opt().unwrap())).collect();
    assert_eq!(found(zone, &ends).grid().describe(), "month end");
}

#[test]
fn hours_stay_on_the_line_of_instants() {
    for change in ["2024-03-30 00:00", "2024-10-26 00:00"] {
        let hours: Vec<i64> = (0..72).map(|hour| utc(change) + hour * 3_600).collect();
        let grid = found("Europe/Berlin", &hours);
        assert_eq!((grid.grid().describe().as_str(), grid.grid().periods()), ("hour", vec![24.0, 168.0]));
        assert_exact(&grid, &hours);
    }
}

#[test]
fn midnights_of_utc_in_a_zoned_column_are_days_too() {
    let midnights: Vec<i64> = (0..366).map(|i| utc("2024-01-01 00:00") + i * DAY).collect();
    let grid = found("Europe/Berlin", &midnights);
    assert_eq!(grid.grid().describe(), "day");
    assert_eq!(grid.format(midnights[0]), "2024-01-01T00:00:00Z");
    assert_exact(&grid, &midnights);
}

#[test]
fn a_time_of_day_that_a_clock_change_skips_or_repeats() {
    let zone = "Europe/Berlin";
    let mut nights = daily(zone, "2024-01-01 02:30", 366);
    let grid = found(zone, &nights);
    assert_eq!(grid.grid().describe(), "day");
    assert_exact(&grid, &nights);
    // On 27 October the clocks show 02:30 twice; here the row is the later one, and comes back as it is.
    let autumn = nights.iter_mut().find(|time| **time == utc("2024-10-27 00:30")).unwrap();
    *autumn += 3_600;
    assert_exact(&found(zone, &nights), &nights);
}

#[test]
fn midnights_that_do_not_exist() {
    // In Brazil clocks went forward at midnight, on 15 October 2017 for one (IANA database, America/Sao_Paulo).
    let zone = "America/Sao_Paulo";
    assert_eq!(
        Zone::try_new(zone).unwrap().instant(utc("2017-10-15 00:00"), 1),
        Some((utc("2017-10-15 03:00"), false))
    );
    let year = daily(zone, "2017-01-01 00:00", 365);
    assert_exact(&found(zone, &year), &year);
    let late = daily(zone, "2017-01-01 00:30", 365);
    assert_exact(&found(zone, &late), &late);
}

#[test]
fn a_stray_row_is_named_in_local_time() {
    let zone = "Europe/Berlin";
    let mut year = daily(zone, "2024-01-01 00:00", 366);
    year[200] += 1;
    let trouble = kind(TimeUnit::Second, zone).grid(&year, None).unwrap_err();
    let Trouble::OffGrid { at, grid } = &trouble else { panic!("{trouble}") };
    assert_eq!((at.as_str(), grid.as_str()), ("2024-07-19T00:00:01", "day from 2024-01-01T00:00:00"));
}

#[test]
fn a_stated_step_chooses_the_line() {
    let zone = "Europe/Berlin";
    let berlin = kind(TimeUnit::Second, zone);
    let step = |stored: &[i64], every: Step| berlin.grid(stored, Some(every));
    let midnights = daily(zone, "2024-03-01 00:00", 60);
    assert_exact(&step(&midnights, Step::Every(DAY)).unwrap(), &midnights);
    let hours = step(&midnights, Step::Every(3_600)).unwrap();
    // One day of March 2024 had 23 hours.
    assert_eq!(hours.index_of(midnights[59]), Some(59 * 24 - 1));
    let months = step(&midnights[..1], Step::Months(1)).unwrap();
    assert_eq!(months.time_at(1), Some(instant(zone, date_time("2024-04-01 00:00"))));
    let utc_midnights: Vec<i64> = (0..60).map(|i| utc("2024-03-01 00:00") + i * DAY).collect();
    assert_exact(&step(&utc_midnights, Step::Every(DAY)).unwrap(), &utc_midnights);
}

#[test]
fn without_a_zone_and_with_plain_numbers() {
    let plain = TimeKind::try_new(&DataType::Int16).unwrap().grid(&[1, 3, 7], None).unwrap();
    assert_eq!((plain.index_of(7), plain.time_at(4), plain.format(9)), (Some(3), Some(9), "9".to_owned()));
    let micros = TimeKind::try_new(&DataType::Timestamp(TimeUnit::Microsecond, None)).unwrap();
    let grid = micros.grid(&[0, 900_000_000, 1_800_000_000], None).unwrap();
    assert_eq!(grid.grid().describe(), "15 minutes");
    let extreme = kind(TimeUnit::Second, "Europe/Berlin").grid(&[i64::MIN, i64::MAX], None);
    assert!(matches!(extreme, Err(Trouble::NoGrid { .. })));
}

proptest! {
    /// Any time of day, any subset of days, any zone: a daily grid with exactly these points.
    #[test]
    fn daily_series_in_any_zone(
        zone in prop::sample::select(vec![
            "Europe/Berlin", "America/New_York", "America/Sao_Paulo", "Australia/Lord_Howe", "Asia/Kathmandu",
            "Africa/Cairo", "Asia/Beirut", "UTC", "-03:30",
        ]),
        unit in prop::sample::select(vec![
            (TimeUnit::Second, 1), (TimeUnit::Millisecond, 1_000),
            (TimeUnit::Microsecond, 1_000_000), (TimeUnit::Nanosecond, 1_000_000_000),
        ]),
        start in 3_700_u64..20_000,
        minute in 0_i64..1_440,
        kept in prop::collection::vec(prop::bool::weighted(0.8), 30..500),
    ) {
        let (unit, per_second) = unit;
        let first = date_time("1970-01-01 00:00") + Days::new(start) + chrono::TimeDelta::minutes(minute);
        let days = (0..kept.len()).filter(|&i| i < 2 || kept[i]);
        let stored: Vec<(usize, i64)> =
            days.map(|i| (i, instant(zone, first + Days::new(i as u64)) * per_second)).collect();
        let times: Vec<i64> = stored.iter().map(|&(_, time)| time).collect();
        let grid = kind(unit, zone).grid(&times, None).unwrap();
        prop_assert_eq!(grid.grid().describe(), "day");
        for (index, time) in stored {
            prop_assert_eq!(grid.index_of(time), Some(index));
            prop_assert_eq!(grid.time_at(index), Some(time));
        }
    }

    /// Months are those of an independent calendar.
    #[test]
    fn months_agree_with_another_calendar(day in -100_000_i32..100_000, step in 1_u32..30, index in 0_usize..200) {
        let dates = TimeKind::try_new(&DataType::Date32).unwrap();
        let grid = dates.grid(&[i64::from(day)], Some(Step::Months(step))).unwrap();
        let first = NaiveDate::from_epoch_days(day).unwrap();
        prop_assume!(first.succ_opt().unwrap().format("%d").to_string() != "01");
        let expected = first.checked_add_months(chrono::Months::new(step * index as u32)).unwrap();
        prop_assert_eq!(grid.time_at(index), Some(i64::from(expected.to_epoch_days())));
        prop_assert_eq!(Axis::Days.format(i64::from(day)), first.to_string());
    }
}
