//! Gaps, plans, leading NULLs, and the ways in which rows can fail to be a series.

use arrow::datatypes::DataType;

use super::super::groups::{Groups, Rows};
use super::*;

const NONE: f64 = f64::NAN;

fn group(rows: &[(Option<i64>, f64, f64)]) -> Group {
    let mut groups = Groups::try_new(&[]).unwrap();
    let rows = Rows {
        keys: vec![],
        times: rows.iter().map(|row| row.0).collect(),
        observed: rows.iter().map(|row| row.1).collect(),
        drivers: vec![rows.iter().map(|row| row.2).collect()],
    };
    groups.push(rows).unwrap();
    groups.close();
    groups.pop().unwrap()
}

fn place_days(group: &Group, every: Option<Step>) -> Result<Placed, Unplaced> {
    place(group, &TimeKind::try_new(&DataType::Date32).unwrap(), every, 1)
}

fn place_numbers(group: &Group, constant: usize) -> Result<Placed, Unplaced> {
    place(group, &TimeKind::try_new(&DataType::Int64).unwrap(), None, constant)
}

fn days(rows: &[(i64, f64, f64)]) -> Group {
    group(&rows.iter().map(|&(time, y, x)| (Some(time), y, x)).collect::<Vec<_>>())
}

fn same(a: &[f64], b: &[f64]) -> bool {
    a.len() == b.len() && a.iter().zip(b).all(|(a, b)| a == b || (a.is_nan() && b.is_nan()))
}

#[test]
fn gaps_become_missing_points() {
    let placed = place_days(&days(&[(10, 1.0, 5.0), (11, 2.0, 6.0), (13, 4.0, 8.0)]), None).unwrap();
    assert!(same(&placed.series.observed, &[1.0, 2.0, NONE, 4.0]));
    assert!(same(&placed.series.drivers[0], &[5.0, 6.0, NONE, 8.0]));
    assert_eq!(placed.times().collect::<Vec<_>>(), [Some(10), Some(11), Some(12), Some(13)]);
    assert_eq!(placed.grid().grid().describe(), "day");
}

#[test]
fn rows_after_the_last_observation_are_the_plan() {
    let rows = [(1, 1.0, 10.0), (2, NONE, 20.0), (3, 3.0, 30.0), (4, NONE, 40.0), (5, NONE, 50.0)];
    let placed = place_numbers(&days(&rows), 0).unwrap();
    assert!(same(&placed.series.observed, &[1.0, NONE, 3.0]));
    assert!(placed.series.drivers.is_empty());
    assert!(same(&placed.series.drifting_drivers[0], &[10.0, 20.0, 30.0, 40.0, 50.0]));
    assert_eq!(placed.time_at(4), Some(5));
}

#[test]
fn rows_before_the_first_observation_are_dropped() {
    let rows = [(1, NONE, 10.0), (2, NONE, 20.0), (3, 3.0, 30.0), (4, 4.0, 40.0)];
    let placed = place_numbers(&days(&rows), 1).unwrap();
    assert!(same(&placed.series.observed, &[3.0, 4.0]));
    assert!(same(&placed.series.drivers[0], &[30.0, 40.0]));
    assert_eq!(placed.time_at(0), Some(3));
}

#[test]
fn infinite_values_stay_for_the_model_to_refuse() {
    let placed = place_numbers(&days(&[(1, 1.0, 0.0), (2, f64::INFINITY, 0.0)]), 1).unwrap();
    assert_eq!(placed.series.observed[1], f64::INFINITY);
}

#[test]
fn a_stated_step_makes_a_finer_grid() {
    let every_other = days(&[(0, 1.0, 0.0), (2, 2.0, 0.0), (4, 3.0, 0.0)]);
    assert_eq!(place_days(&every_other, None).unwrap().len(), 3);
    assert_eq!(place_days(&every_other, Some(Step::Every(1))).unwrap().len(), 5);
}

#[test]
fn a_null_time_is_trouble_with_a_count() {
    let rows = [(Some(1), 1.0, 0.0), (None, 2.0, 0.0), (None, 3.0, 0.0)];
    let unplaced = place_days(&group(&rows), None).unwrap_err();
    assert_eq!(unplaced.trouble, Trouble::MissingTime { rows: 2 });
    assert!(unplaced.grid.is_none());
}

#[test]
fn a_repeated_time_is_named() {
    let unplaced = place_days(&days(&[(0, 1.0, 0.0), (1, 2.0, 0.0), (1, 3.0, 0.0)]), None).unwrap_err();
    assert_eq!(unplaced.trouble, Trouble::DuplicateTime { at: "1970-01-02".to_string() });
}

#[test]
fn a_series_without_observations_still_has_its_grid() {
    let unplaced = place_days(&days(&[(7, NONE, 0.0), (14, NONE, 0.0)]), None).unwrap_err();
    assert_eq!(unplaced.trouble, Trouble::AllMissing);
    let (grid, points) = *unplaced.grid.unwrap();
    assert_eq!((grid.grid().describe().as_str(), points), ("week", 2));
}

#[test]
fn a_time_off_the_grid_is_named() {
    let rows = (0..20).map(|week| (7 * week + i64::from(week == 10), 1.0, 0.0)).collect::<Vec<_>>();
    let unplaced = place_days(&days(&rows), None).unwrap_err();
    assert!(
        matches!(unplaced.trouble, Trouble::OffGrid { ref at, .. } if at.starts_with("1970-03-13")),
        "{unplaced:?}"
    );
}
