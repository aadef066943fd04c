//! The date on the wall clock, for every type.

use std::sync::Arc;

use arrow::array::{
    Date32Array, Date64Array, Int64Array, TimestampMicrosecondArray, TimestampMillisecondArray,
    TimestampNanosecondArray, TimestampSecondArray,
};

use super::*;

/// Python 3: (date(2024, 2, 29) - date(1970, 1, 1)).days
const LEAP_DAY: i64 = 19_782;
/// Seconds from 1970-01-01T00:00:00 to 2024-02-29T00:00:00.
const MIDNIGHT: i64 = LEAP_DAY * 86_400;

fn in_zone(seconds: &[i64], zone: &str) -> Vec<Option<i64>> {
    let column: ArrayRef = Arc::new(TimestampSecondArray::from(seconds.to_vec()).with_timezone(zone));
    read(&column).unwrap()
}

#[test]
fn a_day_begins_at_midnight_in_every_unit() {
    let first_and_last = [MIDNIGHT, MIDNIGHT + 86_399];
    let ticks = |per_second: i64| first_and_last.map(|second| Some(second * per_second + per_second - 1));
    let columns: [ArrayRef; 6] = [
        Arc::new(Date32Array::from(vec![Some(LEAP_DAY as i32), Some(LEAP_DAY as i32)])),
        Arc::new(Date64Array::from(vec![Some(MIDNIGHT * 1_000), Some(MIDNIGHT * 1_000 + 1)])),
        Arc::new(TimestampSecondArray::from(ticks(1).to_vec())),
        Arc::new(TimestampMillisecondArray::from(ticks(1_000).to_vec())),
        Arc::new(TimestampMicrosecondArray::from(ticks(1_000_000).to_vec())),
        Arc::new(TimestampNanosecondArray::from(ticks(1_000_000_000).to_vec())),
    ];
    for column in columns {
        assert!(has_dates(column.data_type()).unwrap());
        assert_eq!(read(&column).unwrap(), [Some(LEAP_DAY), Some(LEAP_DAY)], "{}", column.data_type());
    }
}

#[test]
fn null_stays_null_and_times_before_1970_are_no_exception() {
    let column: ArrayRef =
        Arc::new(TimestampMillisecondArray::from(vec![None, Some(-1), Some(-86_400_000), Some(0)]));
    assert_eq!(read(&column).unwrap(), [None, Some(-1), Some(-1), Some(0)]);
}

#[test]
fn a_zone_has_its_own_midnight() {
    // 2024-02-28T23:30Z: Berlin is an hour ahead in February, Kolkata five and a half, New York five behind.
    let half_past_eleven = MIDNIGHT - 1_800;
    for (zone, day) in [
        ("UTC", -1),
        ("Europe/Berlin", 0),
        ("Asia/Kolkata", 0),
        ("America/New_York", -1),
        ("+00:29", -1),
        ("+00:30", 0),
    ] {
        assert_eq!(in_zone(&[half_past_eleven], zone), [Some(LEAP_DAY + day)], "{zone}");
    }
    // Berlin's clocks went from 02:00 to 03:00 on 2024-03-31 (day 19,813): that day began at 23:00Z and ended at 22:00Z.
    let begin = 19_813 * 86_400 - 3_600;
    let days = in_zone(&[begin - 1, begin, begin + 23 * 3_600 - 1, begin + 23 * 3_600], "Europe/Berlin");
    assert_eq!(days, [Some(19_812), Some(19_813), Some(19_813), Some(19_814)]);
}

#[test]
fn what_has_no_date_is_refused() {
    let integers: ArrayRef = Arc::new(Int64Array::from(vec![1]));
    assert!(matches!(read(&integers), Err(ColumnError::NotATime { .. })));
    assert!(!has_dates(&DataType::Int64).unwrap());
    assert!(!has_dates(&DataType::Utf8).unwrap());
    let nowhere: ArrayRef = Arc::new(TimestampSecondArray::from(vec![0]).with_timezone("Ostrel/Coldwater"));
    assert!(matches!(read(&nowhere), Err(ColumnError::UnknownZone { .. })));
    assert!(matches!(has_dates(nowhere.data_type()), Err(ColumnError::UnknownZone { .. })));
    let far: ArrayRef = Arc::new(TimestampSecondArray::from(vec![i64::MAX]).with_timezone("Europe/Berlin"));
    let said = read(&far).unwrap_err().to_string();
    assert!(said.contains("beyond the years that time zones are known for"), "{said}");
}
