//! Layouts and rows.

use arrow::array::{Array, AsArray, StringArray};
use arrow::datatypes::{Float64Type, Int64Type};

use super::*;
use crate::columns::groups::{Groups, Key, Rows};
use crate::columns::time::TimeKind;

const SPECS: &[ColumnSpec] = &[
    ColumnSpec::time("at", "."),
    ColumnSpec::count("step", Unit::Steps, "."),
    ColumnSpec::number("seasonal", Unit::Part, ".").part(),
    ColumnSpec::number("effect_of_<driver>", Unit::Part, ".").each_driver(),
    ColumnSpec::number("effect_of_<driver>_se", Unit::Part, ".").each_driver(),
    ColumnSpec::number("variance_of_<driver>", Unit::Variance, ".").each_drifting_driver(),
    ColumnSpec::text("status", "."),
];

fn layout(parts: bool) -> Layout {
    Layout {
        time: DataType::Int64,
        drivers: vec!["price".to_string()],
        drifting_drivers: vec!["promo".to_string()],
        scale: Scale::Log,
        parts,
        states: 0,
        disturbances: 0,
    }
}

fn names(columns: &[(FieldRef, ColumnKind)]) -> Vec<&str> {
    columns.iter().map(|(field, _)| field.name().as_str()).collect()
}

fn keys(values: &[&str]) -> Vec<Key> {
    let mut groups = Groups::try_new(&[DataType::Utf8]).unwrap();
    let count = values.len();
    let column = Arc::new(StringArray::from(values.to_vec()));
    let rows =
        Rows { keys: vec![column], times: vec![Some(1); count], observed: vec![0.0; count], drivers: vec![] };
    groups.push(rows).unwrap();
    groups.close();
    std::iter::from_fn(|| groups.pop()).map(|group| group.key).collect()
}

#[test]
fn columns_of_one_driver_stand_together() {
    let expected = [
        "at",
        "step",
        "effect_of_price",
        "effect_of_price_se",
        "effect_of_promo",
        "effect_of_promo_se",
        "variance_of_promo",
        "status",
    ];
    assert_eq!(names(&layout(false).columns(SPECS)), expected);
}

#[test]
fn parts_come_when_asked_for() {
    assert!(!names(&layout(false).columns(SPECS)).contains(&"seasonal"));
    assert!(names(&layout(true).columns(SPECS)).contains(&"seasonal"));
}

#[test]
fn the_unit_is_in_the_metadata() {
    let columns = layout(true).columns(SPECS);
    let unit = |name: &str| {
        let (field, _) = columns.iter().find(|(field, _)| field.name() == name).unwrap();
        field.metadata().get("unit").cloned()
    };
    assert_eq!(unit("seasonal").as_deref(), Some("factor"));
    assert_eq!(unit("variance_of_promo").as_deref(), Some("log squared"));
    assert_eq!(unit("status"), None);
}

fn rows() -> ResultRows {
    let key = Arc::new(Field::new("depot", DataType::Utf8, true));
    let shape = ResultSchema::new(vec![key], layout(true).columns(SPECS));
    ResultRows::new(Arc::new(shape), TimeKind::try_new(&DataType::Int64).unwrap())
}

#[test]
fn columns_that_are_not_named_are_null_and_nan_is_null() {
    let keys = keys(&["a", "b"]);
    let mut rows = rows();
    rows.begin(&keys[0], 2);
    rows.times("at", [Some(5), Some(6)]);
    rows.counts("step", [1, 2]);
    rows.numbers("seasonal", [0.5, f64::NAN]);
    rows.text("status", "ok");
    rows.end();
    rows.begin(&keys[1], 1);
    rows.text("status", "constant");
    rows.end();
    let batch = rows.finish().unwrap();

    assert_eq!(batch.num_rows(), 3);
    assert_eq!(batch.column(0).as_string::<i32>().iter().flatten().collect::<Vec<_>>(), ["a", "a", "b"]);
    let at = batch.column_by_name("at").unwrap().as_primitive::<Int64Type>();
    assert_eq!(at.iter().collect::<Vec<_>>(), [Some(5), Some(6), None]);
    let seasonal = batch.column_by_name("seasonal").unwrap().as_primitive::<Float64Type>();
    assert_eq!(seasonal.iter().collect::<Vec<_>>(), [Some(0.5), None, None]);
    assert_eq!(batch.column_by_name("effect_of_price").unwrap().null_count(), 3);
}

#[test]
fn a_slip_of_a_writer_is_an_error_and_not_a_wrong_table() {
    let keys = keys(&["a"]);
    let mut unknown = rows();
    unknown.begin(&keys[0], 1);
    unknown.number("levle", 1.0);
    unknown.end();
    assert!(unknown.finish().unwrap_err().to_string().contains("'levle'"));

    let mut too_long = rows();
    too_long.begin(&keys[0], 1);
    too_long.numbers("seasonal", [1.0, 2.0]);
    too_long.end();
    assert!(too_long.finish().is_err());
}
