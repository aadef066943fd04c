//! Steps that are taken and steps that are refused.

use super::*;

const SECONDS: Axis = Axis::Ticks { per_second: 1 };
const NANOS: Axis = Axis::Ticks { per_second: 1_000_000_000 };
/// Nanoseconds in an hour.
const HOUR: i64 = 3_600_000_000_000;

fn interval(axis: Axis, months: i32, days: i32, nanoseconds: i64) -> Result<Step, String> {
    from_interval(axis, IntervalMonthDayNano { months, days, nanoseconds }).map_err(|error| error.to_string())
}

#[test]
fn months_and_days_and_hours() {
    assert_eq!(interval(Axis::Days, 3, 0, 0), Ok(Step::Months(3)));
    assert_eq!(interval(Axis::Days, 0, 7, 0), Ok(Step::Every(7)));
    assert_eq!(interval(Axis::Days, 0, 0, 48 * HOUR), Ok(Step::Every(2)));
    assert_eq!(interval(SECONDS, 12, 0, 0), Ok(Step::Months(12)));
    assert_eq!(interval(SECONDS, 0, 1, 0), Ok(Step::Every(86_400)));
    assert_eq!(interval(SECONDS, 0, 1, 12 * HOUR), Ok(Step::Every(129_600)));
    assert_eq!(interval(NANOS, 0, 0, HOUR / 4), Ok(Step::Every(HOUR / 4)));
    assert_eq!(interval(Axis::Instants { per_second: 1_000 }, 0, 0, HOUR), Ok(Step::Every(3_600_000)));
    assert_eq!(interval(NANOS, 0, 1, -HOUR), Ok(Step::Every(23 * HOUR)));
}

#[test]
fn plain_numbers() {
    assert_eq!(from_integer(Axis::Integer, 5), Ok(Step::Every(5)));
    for (axis, step, why) in [
        (Axis::Integer, 0, "0 does not lead forward; an integer time column takes an integer of at least 1"),
        (Axis::Integer, -2, "-2 does not lead forward"),
        (Axis::Days, 7, "7 does not say of what unit; a DATE column takes whole days"),
        (SECONDS, 60, "60 does not say of what unit; a TIMESTAMP column takes"),
    ] {
        let said = from_integer(axis, step).unwrap_err().to_string();
        assert!(said.starts_with(why), "{said}");
    }
}

#[test]
fn refusals_say_the_value_the_rule_and_the_remedy() {
    let cases = [
        (Axis::Days, (1, 2, 0), "INTERVAL '1 months 2 days' mixes months with days or hours"),
        (
            Axis::Days,
            (0, 0, 6 * HOUR),
            "INTERVAL '21600 seconds' is not a whole number of the column's units; a DATE",
        ),
        (Axis::Days, (0, 0, 0), "INTERVAL '0 days' does not lead forward"),
        (Axis::Days, (-1, 0, 0), "INTERVAL '-1 months' does not lead forward"),
        (Axis::Days, (0, -7, 0), "INTERVAL '-7 days' does not lead forward"),
        (SECONDS, (0, 0, 500_000_000), "INTERVAL '500000000 nanoseconds' is not a whole number"),
        (SECONDS, (1, 0, HOUR), "INTERVAL '1 months 3600 seconds' mixes"),
        (NANOS, (0, 200_000, 0), "INTERVAL '200000 days' is longer than the column's type can say"),
        (
            Axis::Integer,
            (0, 1, 0),
            "INTERVAL '1 days' has no length in plain numbers; an integer time column",
        ),
    ];
    for (axis, (months, days, nanoseconds), expected) in cases {
        let said = interval(axis, months, days, nanoseconds).unwrap_err();
        assert!(said.starts_with(expected), "{said}");
    }
}

#[test]
fn a_period_is_whole_days_or_months() {
    let period = |months, days, nanoseconds| {
        of_period(IntervalMonthDayNano { months, days, nanoseconds }).map_err(|error| error.to_string())
    };
    assert_eq!(period(1, 0, 0), Ok(Step::Months(1)));
    assert_eq!(period(0, 7, 0), Ok(Step::Every(7)));
    assert_eq!(period(0, 0, 24 * HOUR), Ok(Step::Every(1)));
    for (months, days, nanoseconds, why) in [
        (0, 0, HOUR, "INTERVAL '3600 seconds' is not a whole number of days; a period lasts whole days"),
        (0, 1, HOUR, "INTERVAL '1 days 3600 seconds' is not a whole number of days"),
        (0, 0, 0, "INTERVAL '0 days' does not lead forward; a period lasts"),
        (-1, 0, 0, "INTERVAL '-1 months' does not lead forward"),
        (0, -7, 0, "INTERVAL '-7 days' does not lead forward"),
        (1, 1, 0, "INTERVAL '1 months 1 days' mixes months with days or hours"),
    ] {
        let said = period(months, days, nanoseconds).unwrap_err();
        assert!(said.starts_with(why), "{said}");
    }
}
