//! Grids found from times: each rule on dates that show it.

use super::*;

fn found(axis: Axis, times: &[i64]) -> Grid {
    Grid::find(axis, times).unwrap_or_else(|trouble| panic!("{trouble}"))
}

/// Name of the grid of some dates.
fn name(dates: &[(i64, u32, u32)]) -> String {
    found(Axis::Days, &days(dates)).describe()
}

#[test]
fn calendar_steps() {
    assert_eq!(name(&[(2024, 1, 1), (2024, 2, 1), (2024, 3, 1), (2024, 4, 1)]), "month");
    assert_eq!(name(&[(2024, 1, 15), (2024, 2, 15), (2024, 5, 15), (2024, 6, 15)]), "month");
    assert_eq!(name(&[(2023, 1, 31), (2023, 2, 28), (2023, 3, 31), (2023, 4, 30)]), "month end");
    assert_eq!(name(&[(2024, 1, 30), (2024, 2, 29), (2024, 3, 30), (2024, 4, 30)]), "month");
    assert_eq!(name(&[(2023, 3, 31), (2023, 6, 30), (2023, 9, 30), (2023, 12, 31)]), "quarter, at month end");
    assert_eq!(name(&[(2023, 1, 1), (2023, 4, 1), (2023, 10, 1), (2024, 1, 1)]), "quarter");
    assert_eq!(name(&[(2020, 7, 1), (2021, 7, 1), (2022, 7, 1), (2024, 7, 1)]), "year");
    assert_eq!(name(&[(2020, 2, 29), (2021, 2, 28), (2022, 2, 28), (2024, 2, 29)]), "year, at month end");
    assert_eq!(name(&[(2019, 2, 28), (2020, 2, 28), (2021, 2, 28), (2022, 2, 28)]), "year");
}

#[test]
fn short_months_alone_count_as_month_ends() {
    let grid = found(Axis::Days, &days(&[(2024, 4, 30), (2024, 6, 30)]));
    assert_eq!((grid.describe().as_str(), grid.month_end()), ("2 months, at month end", true));
    assert_eq!(grid.time_at(2), Some(day(2024, 8, 31)));
    let leap_days = found(Axis::Days, &days(&[(2016, 2, 29), (2020, 2, 29), (2024, 2, 29)]));
    assert_eq!(leap_days.step(), Step::Months(48));
}

#[test]
fn fixed_steps_on_dates() {
    assert_eq!(name(&[(2024, 1, 1), (2024, 1, 2), (2024, 1, 3)]), "day");
    assert_eq!(name(&[(2024, 1, 1), (2024, 1, 8), (2024, 1, 29), (2024, 2, 12)]), "week");
    assert_eq!(name(&[(2024, 1, 1), (2024, 1, 15), (2024, 1, 29), (2024, 2, 12)]), "2 weeks");
    // Four-weekly periods pass through the first of two months running; they are no months.
    assert_eq!(name(&[(2023, 1, 4), (2023, 2, 1), (2023, 3, 1), (2023, 3, 29), (2023, 4, 26)]), "4 weeks");
}

#[test]
fn weeks_with_many_missing_weeks() {
    let weeks = Grid::with_step(Axis::Days, Step::Every(7), day(2020, 1, 6));
    let kept = points(&weeks, (0..208).filter(|i| i % 5 != 2 && i % 7 != 3 && !(60..100).contains(i)));
    assert_eq!(found(Axis::Days, &kept), weeks);
}

#[test]
fn working_days_are_days_with_gaps() {
    // 2024-01-01 was a Monday (ISO 8601 week 1 of 2024 starts on it).
    let working: Vec<i64> = (0..365).filter(|i| i % 7 < 5).map(|i| day(2024, 1, 1) + i).collect();
    let grid = found(Axis::Days, &working);
    assert_eq!((grid.describe().as_str(), grid.periods()), ("day", vec![7.0, 365.25]));
    let market_days: Vec<i64> =
        (0..365).filter(|i| i % 7 == 1 || i % 7 == 4).map(|i| day(2024, 1, 1) + i).collect();
    assert_eq!(found(Axis::Days, &market_days).describe(), "day");
}

#[test]
fn fixed_steps_on_timestamps() {
    for (seconds, name) in
        [(1, "second"), (60, "minute"), (900, "15 minutes"), (3_600, "hour"), (DAY, "day"), (7 * DAY, "week")]
    {
        let grid = Grid::with_step(SECONDS, Step::Every(seconds), 1_700_000_000);
        let times = points(&grid, [0, 1, 2, 5, 6, 9, 10, 11, 30]);
        assert_eq!(found(SECONDS, &times), grid);
        assert_eq!(grid.describe(), name);
    }
    let opening_hours: Vec<i64> =
        (0..30 * 24).filter(|h| (8..18).contains(&(h % 24))).map(|h| h * 3_600).collect();
    assert_eq!(found(SECONDS, &opening_hours).describe(), "hour");
    let months = Grid::with_step(SECONDS, Step::Months(1), day(2024, 1, 31) * DAY + 3_600);
    assert_eq!(found(SECONDS, &points(&months, [0, 1, 2, 4, 5])), months);
}

#[test]
fn plain_numbers() {
    assert_eq!(found(Axis::Integer, &[1990, 1991, 1993, 1994]).describe(), "step 1");
    assert_eq!(found(Axis::Integer, &[-10, -5, 5, 20]).describe(), "step 5");
    assert_eq!(found(Axis::Integer, &[202_401, 202_402, 202_403]).step(), Step::Every(1));
}

#[test]
fn one_or_two_times() {
    assert!(no_grid(Grid::find(Axis::Days, &[])).contains("no time at all"));
    assert!(no_grid(Grid::find(Axis::Days, &[day(2024, 5, 6)])).contains("2024-05-06"));
    assert_eq!(name(&[(2024, 1, 1), (2024, 1, 4)]), "3 days");
    assert_eq!(name(&[(2024, 1, 1), (2024, 2, 1)]), "month");
    assert_eq!(name(&[(2024, 2, 1), (2024, 2, 29)]), "4 weeks");
    assert_eq!(name(&[(2023, 2, 28), (2023, 3, 31)]), "month end");
    let one = Grid::find_with_step(Axis::Days, Step::Every(7), &[day(2024, 5, 6)]).unwrap();
    assert_eq!(one.time_at(1), Some(day(2024, 5, 13)));
    assert!(no_grid(Grid::find_with_step(Axis::Days, Step::Months(1), &[])).contains("no time at all"));
}

#[test]
fn a_stray_second_in_daily_data_is_named() {
    let mut times: Vec<i64> = (0..40).map(|i| (day(2024, 1, 1) + i) * DAY).collect();
    times[17] += 1;
    let (at, grid) = off_grid(Grid::find(SECONDS, &times));
    assert_eq!((at.as_str(), grid.as_str()), ("2024-01-18T00:00:01", "day from 2024-01-01T00:00:00"));
    // The same as a row of its own, in a series of five.
    let midnight = |i: i64| (day(2024, 1, 1) + i) * DAY;
    let few = [midnight(0), midnight(1), midnight(1) + 1, midnight(2), midnight(3)];
    assert_eq!(off_grid(Grid::find(SECONDS, &few)).0, "2024-01-02T00:00:01");
}

#[test]
fn a_stray_first_or_last_row_is_named() {
    let mut times: Vec<i64> = (0..30).map(|i| day(2024, 1, 1) + 7 * i).collect();
    times[0] -= 2;
    assert_eq!(
        off_grid(Grid::find(Axis::Days, &times)),
        ("2023-12-30".into(), "week from 2024-01-08".into())
    );
    times[0] += 2;
    times[29] += 1;
    assert_eq!(
        off_grid(Grid::find(Axis::Days, &times)),
        ("2024-07-23".into(), "week from 2024-01-01".into())
    );
}

#[test]
fn a_stray_day_in_weekly_and_monthly_data_is_named() {
    let mut weeks: Vec<i64> = (0..16).map(|i| day(2024, 1, 1) + 7 * i).collect();
    weeks[5] += 1;
    assert_eq!(off_grid(Grid::find(Axis::Days, &weeks)).0, "2024-02-06");
    let months = Grid::with_step(Axis::Days, Step::Months(1), day(2022, 1, 1));
    let mut times = points(&months, 0..24);
    times[7] += 1;
    times[9] += 3;
    let (at, grid) = off_grid(Grid::find(Axis::Days, &times));
    assert_eq!((at.as_str(), grid.as_str()), ("2022-08-02 (the first of 2)", "month from 2022-01-01"));
    let quarters = Grid::with_step(Axis::Days, Step::Months(3), day(2014, 3, 31));
    let mut times = points(&quarters, 0..40);
    times.push(day(2024, 1, 31));
    times.sort_unstable();
    assert_eq!(off_grid(Grid::find(Axis::Days, &times)).0, "2024-01-31");
}

#[test]
fn the_first_working_day_of_the_month_is_not_a_grid() {
    // Day 0, 1970-01-01, was a Thursday, so day n has the weekday (n + 3) mod 7, Monday being 0.
    // 1 January 2022 was a Saturday.
    let months = Grid::with_step(Axis::Days, Step::Months(1), day(2022, 1, 1));
    let next_working = |d: i64| d + [0, 0, 0, 0, 0, 2, 1][(d + 3).rem_euclid(7) as usize];
    let times: Vec<i64> = points(&months, 0..36).into_iter().map(next_working).collect();
    let (at, grid) = off_grid(Grid::find(Axis::Days, &times));
    assert!(at.starts_with("2022-01-03 (the first of "), "{at}");
    assert_eq!(grid, "month from 2022-02-01");
}

#[test]
fn irregular_times_have_no_grid() {
    // Squares: their differences 1, 3, 5, ... never repeat.
    let times: Vec<i64> = (0..60).map(|i| 1_000_003 * i + i * i).collect();
    let why = no_grid(Grid::find(SECONDS, &times));
    assert!(why.contains("60 times") && why.contains("1970-01-01T00:00:00"), "{why}");
    // Every day appears twice, the second time a second later: no step to be believed either.
    let doubled: Vec<i64> = (0..50).flat_map(|i| [i * DAY, i * DAY + 1]).collect();
    assert!(no_grid(Grid::find(SECONDS, &doubled)).contains("second"));
}

#[test]
fn too_long_a_grid_is_refused() {
    let times = [0, 1, 2, 3, 20_000_000];
    let why = no_grid(Grid::find_with_step(Axis::Integer, Step::Every(1), &times));
    assert!(why.contains("20000001 points") && why.contains("10000000"), "{why}");
    assert!(no_grid(Grid::find(Axis::Integer, &[i64::MIN, i64::MAX])).contains("too far apart"));
    assert!(no_grid(Grid::find(Axis::Days, &[i64::MIN, i64::MAX])).contains("too far apart"));
}

#[test]
fn a_given_step_settles_doubts() {
    let sparse = days(&[(2020, 1, 1), (2020, 7, 4), (2023, 3, 3), (2024, 12, 24)]);
    assert!(Grid::find(Axis::Days, &sparse).is_err());
    let grid = Grid::find_with_step(Axis::Days, Step::Every(1), &sparse).unwrap();
    assert_eq!(grid.index_of(day(2020, 7, 4)), Some(185));
    // The others decide which weekday and which day of the month it is, not the first row.
    let mut weeks: Vec<i64> = (0..9).map(|i| day(2024, 1, 1) + 7 * i).collect();
    weeks[0] += 1;
    assert_eq!(off_grid(Grid::find_with_step(Axis::Days, Step::Every(7), &weeks)).0, "2024-01-02");
    let ends = days(&[(2024, 2, 29), (2024, 3, 29), (2024, 4, 29)]);
    let grid = Grid::find_with_step(Axis::Days, Step::Months(1), &ends).unwrap();
    assert!(!grid.month_end());
    let (at, grid) = off_grid(Grid::find_with_step(Axis::Days, Step::Months(3), &ends));
    assert_eq!((at.as_str(), grid.as_str()), ("2024-03-29 (the first of 2)", "quarter from 2024-02-29"));
}

#[test]
fn disorder_is_said() {
    let doubled = Grid::find(Axis::Days, &[1, 2, 2, 3]);
    assert_eq!(doubled, Err(Trouble::DuplicateTime { at: "1970-01-03".into() }));
    assert!(no_grid(Grid::find(Axis::Integer, &[3, 1])).contains("3 comes before 1"));
}
