//! Dates, and how times are written.

use super::super::civil::Civil;
use super::*;

#[test]
fn every_day_from_1600_to_2400_goes_there_and_back() {
    // The Gregorian calendar repeats after 400 years; these are two full cycles, walked day by day with the
    // leap rule of ISO 8601 (years divisible by 4, of the centuries those divisible by 400).
    // Python 3: (date(1600, 1, 1) - date(1970, 1, 1)).days
    let mut number = -135_140;
    for year in 1600..=2400 {
        let leap = year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
        let lengths = [31, if leap { 29 } else { 28 }, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31];
        for (month, length) in (1..).zip(lengths) {
            for day in 1..=length {
                let date = Civil { year, month, day };
                assert_eq!(date.to_days(), Some(number));
                assert_eq!(Civil::from_days(number), date);
                assert_eq!(date.is_month_end(), day == length);
                number += 1;
            }
        }
    }
    // Python 3: (date(2400, 12, 31) - date(1970, 1, 1)).days + 1
    assert_eq!(number, 157_420);
}

#[test]
fn known_days() {
    // By definition of the epoch; the other two from Python 3: (date(...) - date(1970, 1, 1)).days
    assert_eq!(Civil::from_days(0), Civil { year: 1970, month: 1, day: 1 });
    assert_eq!(day(2000, 2, 29), 11_016);
    assert_eq!(day(2024, 1, 1), 19_723);
}

#[test]
fn the_ends_of_the_range_are_harmless() {
    for days in [i64::MIN, i64::MIN + 1, i64::MAX - 1, i64::MAX] {
        assert_eq!(Civil::from_days(days).to_days(), Some(days));
        assert!(Axis::Days.format(days).contains('-'));
        assert!(SECONDS.format(days).contains('T'));
    }
    assert_eq!(Civil { year: i64::MAX, month: 1, day: 1 }.to_days(), None);
}

#[test]
fn months_are_clipped_to_their_length() {
    let index = Civil { year: 2024, month: 2, day: 1 }.month_index();
    assert_eq!(Civil::in_month(index, 31), Civil { year: 2024, month: 2, day: 29 });
    assert_eq!(Civil::in_month(index - 12, 31), Civil { year: 2023, month: 2, day: 28 });
    assert_eq!(Civil::in_month(index + 1, 30), Civil { year: 2024, month: 3, day: 30 });
    assert_eq!(Civil::in_month(-1, 31), Civil { year: -1, month: 12, day: 31 });
}

#[test]
fn times_are_written_as_iso_8601() {
    assert_eq!(Axis::Days.format(day(2024, 3, 31)), "2024-03-31");
    assert_eq!(Axis::Days.format(day(5, 1, 2)), "0005-01-02");
    assert_eq!(Axis::Days.format(day(-5, 1, 2)), "-0005-01-02");
    assert_eq!(Axis::Days.format(day(12_345, 1, 2)), "+12345-01-02");
    assert_eq!(SECONDS.format(-1), "1969-12-31T23:59:59");
    assert_eq!(Axis::Ticks { per_second: 1_000 }.format(1_250), "1970-01-01T00:00:01.250");
    assert_eq!(Axis::Ticks { per_second: 1_000_000 }.format(1), "1970-01-01T00:00:00.000001");
    assert_eq!(Axis::Ticks { per_second: 1_000_000_000 }.format(1), "1970-01-01T00:00:00.000000001");
    assert_eq!(Axis::Instants { per_second: 1 }.format(3_600), "1970-01-01T01:00:00Z");
    assert_eq!(Axis::Integer.format(-7), "-7");
}
