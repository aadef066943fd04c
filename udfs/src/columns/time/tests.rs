//! Every type of time column there and back, and what is refused.

use std::sync::Arc;

use arrow::array::{Date32Array, Float64Array, UInt64Array, new_empty_array};
use arrow::datatypes::IntervalUnit;

use super::*;

fn kind(data_type: &DataType) -> TimeKind {
    TimeKind::try_new(data_type).unwrap()
}

/// Every type that is a time.
fn time_types() -> Vec<DataType> {
    let mut types = vec![DataType::Date32, DataType::Date64];
    types.extend([DataType::Int8, DataType::Int16, DataType::Int32, DataType::Int64]);
    types.extend([DataType::UInt8, DataType::UInt16, DataType::UInt32, DataType::UInt64]);
    for unit in [TimeUnit::Second, TimeUnit::Millisecond, TimeUnit::Microsecond, TimeUnit::Nanosecond] {
        for zone in [None, Some("UTC"), Some("+05:30"), Some("Europe/Berlin"), Some("America/New_York")] {
            types.push(DataType::Timestamp(unit, zone.map(Arc::from)));
        }
    }
    types
}

#[test]
fn every_type_comes_back_as_it_was() {
    for data_type in time_types() {
        let kind = kind(&data_type);
        let stored = vec![Some(0), None, Some(1), Some(100), None];
        let column = kind.array(&stored).unwrap();
        assert_eq!(column.data_type(), &data_type);
        assert_eq!(kind.read(&column).unwrap(), stored, "{data_type}");
        let part = column.slice(2, 2);
        assert_eq!(kind.read(&part).unwrap(), [Some(1), Some(100)], "{data_type}");
        assert!(kind.read(&new_empty_array(&data_type)).unwrap().is_empty());
    }
}

#[test]
fn the_stored_integers_are_the_column_s_own() {
    let dates: ArrayRef = Arc::new(Date32Array::from(vec![19_723, -1]));
    let date = kind(&DataType::Date32);
    assert_eq!(date.read(&dates).unwrap(), [Some(19_723), Some(-1)]);
    // Python 3: (date(2024, 1, 1) - date(1970, 1, 1)).days = 19723
    assert_eq!(date.axis().format(19_723), "2024-01-01");
    let zoned = kind(&DataType::Timestamp(TimeUnit::Millisecond, Some("Europe/Berlin".into())));
    assert_eq!(zoned.axis(), Axis::Ticks { per_second: 1_000 });
    assert_eq!(zoned.read(&zoned.array(&[Some(-1)]).unwrap()).unwrap(), [Some(-1)]);
}

#[test]
fn what_a_type_cannot_hold_becomes_null() {
    let column = kind(&DataType::Int8).array(&[Some(127), Some(128)]).unwrap();
    assert_eq!((column.is_null(0), column.is_null(1)), (false, true));
    let column = kind(&DataType::UInt32).array(&[Some(-1)]).unwrap();
    assert!(column.is_null(0));
    let column = kind(&DataType::Date32).array(&[Some(i64::from(i32::MAX) + 1)]).unwrap();
    assert!(column.is_null(0));
}

#[test]
fn other_types_are_refused_with_the_list() {
    for data_type in [
        DataType::Utf8,
        DataType::Float64,
        DataType::Boolean,
        DataType::Time64(TimeUnit::Microsecond),
        DataType::Interval(IntervalUnit::DayTime),
        DataType::Duration(TimeUnit::Second),
        DataType::Decimal128(10, 0),
    ] {
        let said = TimeKind::try_new(&data_type).unwrap_err().to_string();
        assert!(
            said.contains(&format!("has type {data_type};")) && said.contains("DATE, a TIMESTAMP"),
            "{said}"
        );
    }
    let other: ArrayRef = Arc::new(Float64Array::from(vec![1.0]));
    assert!(kind(&DataType::Date32).read(&other).is_err());
}

#[test]
fn unknown_zones_are_named() {
    let data_type = DataType::Timestamp(TimeUnit::Second, Some("Europe/Ostrel".into()));
    let said = TimeKind::try_new(&data_type).unwrap_err().to_string();
    assert!(said.contains("'Europe/Ostrel'") && said.contains("'Europe/Berlin'"), "{said}");
}

#[test]
fn numbers_beyond_the_range_are_named() {
    let column: ArrayRef = Arc::new(UInt64Array::from(vec![1, u64::MAX]));
    let said = kind(&DataType::UInt64).read(&column).unwrap_err().to_string();
    assert!(said.contains("18446744073709551615") && said.contains("64-bit"), "{said}");
}
