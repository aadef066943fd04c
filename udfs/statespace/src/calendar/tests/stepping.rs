//! Grids of a known step: their points, names and seasons.

use super::*;

/// The first `n` points as they are written.
fn written(axis: Axis, step: Step, first: i64, n: usize) -> Vec<String> {
    points(&Grid::with_step(axis, step, first), 0..n).into_iter().map(|t| axis.format(t)).collect()
}

#[test]
fn a_month_end_stays_a_month_end() {
    let ends = written(Axis::Days, Step::Months(1), day(2023, 11, 30), 5);
    assert_eq!(ends, ["2023-11-30", "2023-12-31", "2024-01-31", "2024-02-29", "2024-03-31"]);
    let quarters = written(Axis::Days, Step::Months(3), day(2023, 6, 30), 4);
    assert_eq!(quarters, ["2023-06-30", "2023-09-30", "2023-12-31", "2024-03-31"]);
}

#[test]
fn a_day_that_a_month_lacks_is_clipped_and_comes_back() {
    let clipped = written(Axis::Days, Step::Months(1), day(2023, 1, 30), 4);
    assert_eq!(clipped, ["2023-01-30", "2023-02-28", "2023-03-30", "2023-04-30"]);
}

#[test]
fn leap_days_by_the_year() {
    let years = written(Axis::Days, Step::Months(12), day(2024, 2, 29), 5);
    assert_eq!(years, ["2024-02-29", "2025-02-28", "2026-02-28", "2027-02-28", "2028-02-29"]);
}

#[test]
fn the_time_of_day_is_kept() {
    let first = day(2024, 1, 31) * DAY + 6 * 3_600;
    let ends = written(SECONDS, Step::Months(1), first, 3);
    assert_eq!(ends, ["2024-01-31T06:00:00", "2024-02-29T06:00:00", "2024-03-31T06:00:00"]);
    let grid = Grid::with_step(SECONDS, Step::Months(1), first);
    assert_eq!(grid.index_of(day(2024, 2, 29) * DAY), None);
}

#[test]
fn what_is_not_on_the_grid_has_no_number() {
    let weeks = Grid::with_step(Axis::Days, Step::Every(7), day(2024, 1, 1));
    assert_eq!(weeks.index_of(day(2024, 1, 15)), Some(2));
    assert_eq!(weeks.index_of(day(2024, 1, 16)), None);
    assert_eq!(weeks.index_of(day(2023, 12, 25)), None);
    let quarters = Grid::with_step(Axis::Days, Step::Months(3), day(2024, 1, 1));
    assert_eq!(quarters.index_of(day(2024, 7, 1)), Some(2));
    assert_eq!(quarters.index_of(day(2024, 6, 1)), None);
    assert_eq!(quarters.index_of(day(2024, 7, 2)), None);
    assert_eq!(quarters.index_of(day(2023, 10, 1)), None);
}

#[test]
fn beyond_the_range_there_is_no_time() {
    let grid = Grid::with_step(Axis::Integer, Step::Every(i64::MAX), i64::MIN);
    assert_eq!(grid.time_at(2), Some(i64::MAX - 1));
    assert_eq!(grid.time_at(3), None);
    assert_eq!(grid.time_at(usize::MAX), None);
    assert_eq!(grid.index_of(i64::MAX - 1), Some(2));
    let nanos = Axis::Ticks { per_second: 1_000_000_000 };
    let years = Grid::with_step(nanos, Step::Months(12), 0);
    // 2^63 nanoseconds are 292.27 years, so 1970 + 292 still fits and 1970 + 293 does not.
    assert!(years.time_at(292).is_some());
    assert_eq!(years.time_at(293), None);
    assert_eq!(Grid::with_step(Axis::Days, Step::Months(u32::MAX), 0).time_at(usize::MAX), None);
}

#[test]
fn steps_below_one_count_as_one() {
    assert_eq!(Grid::with_step(Axis::Days, Step::Every(0), 5).step(), Step::Every(1));
    assert_eq!(Grid::with_step(Axis::Days, Step::Months(0), 5).step(), Step::Months(1));
    assert_eq!(Grid::with_step(Axis::Integer, Step::Months(6), 5).step(), Step::Every(6));
}

#[test]
fn names_and_seasons() {
    let first = day(2024, 1, 1);
    let nanos = Axis::Ticks { per_second: 1_000_000_000 };
    let cases: [(Axis, Step, i64, &str, &[f64]); 24] = [
        (Axis::Days, Step::Every(1), first, "day", &[7.0, 365.25]),
        (Axis::Days, Step::Every(2), first, "2 days", &[182.63]),
        (Axis::Days, Step::Every(7), first, "week", &[52.18]),
        (Axis::Days, Step::Every(14), first, "2 weeks", &[26.09]),
        (Axis::Days, Step::Every(91), first, "13 weeks", &[4.01]),
        (Axis::Days, Step::Every(182), first, "26 weeks", &[]),
        (Axis::Days, Step::Months(1), first, "month", &[12.0]),
        (Axis::Days, Step::Months(1), first - 1, "month end", &[12.0]),
        (Axis::Days, Step::Months(2), first, "2 months", &[6.0]),
        (Axis::Days, Step::Months(3), first, "quarter", &[4.0]),
        (Axis::Days, Step::Months(3), first - 1, "quarter, at month end", &[4.0]),
        (Axis::Days, Step::Months(5), first, "5 months", &[]),
        (Axis::Days, Step::Months(12), first, "year", &[]),
        (Axis::Days, Step::Months(12), first - 1, "year", &[]),
        (Axis::Days, Step::Months(12), day(2024, 2, 29), "year, at month end", &[]),
        (Axis::Days, Step::Months(24), first, "2 years", &[]),
        (SECONDS, Step::Every(7 * DAY), first * DAY, "week", &[52.18]),
        (SECONDS, Step::Every(3_600), first * DAY, "hour", &[24.0, 168.0]),
        (SECONDS, Step::Every(6 * 3_600), first * DAY, "6 hours", &[4.0, 28.0]),
        (SECONDS, Step::Every(12 * 3_600), first * DAY, "12 hours", &[2.0, 14.0]),
        (SECONDS, Step::Every(900), first * DAY, "15 minutes", &[96.0, 672.0]),
        (nanos, Step::Every(10_000_000_000), 0, "10 seconds", &[]),
        (nanos, Step::Every(250_000_000), 0, "250 milliseconds", &[]),
        (Axis::Integer, Step::Every(5), 0, "step 5", &[]),
    ];
    for (axis, step, first, name, periods) in cases {
        let grid = Grid::with_step(axis, step, first);
        assert_eq!((grid.describe().as_str(), grid.periods().as_slice()), (name, periods));
    }
}
