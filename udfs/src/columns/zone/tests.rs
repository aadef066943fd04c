//! Clock changes of known date. Sources: the IANA time zone database; in the European Union clocks change on
//! the last Sunday of March and of October at 01:00 UTC (Directive 2000/84/EC), in the United States on the
//! second Sunday of March and the first of November at 02:00 local time (Energy Policy Act of 2005).

use super::*;

/// The ticks (here: seconds) of a wall clock or of UTC at `2024-03-31 02:30:00`.
fn at(text: &str) -> i64 {
    NaiveDateTime::parse_from_str(text, "%Y-%m-%d %H:%M:%S").unwrap().and_utc().timestamp()
}

fn zone(name: &str) -> Zone {
    Zone::try_new(name).unwrap()
}

/// The instant of a local time, both in words, and whether it exists.
fn instant(zone_name: &str, local: &str) -> (String, bool) {
    let (instant, exists) = zone(zone_name).instant(at(local), 1).unwrap();
    (date_time(instant, 1).unwrap().to_string(), exists)
}

#[test]
fn summer_and_winter() {
    assert_eq!(zone("Europe/Berlin").local(at("2024-07-01 10:00:00"), 1), Some(at("2024-07-01 12:00:00")));
    assert_eq!(zone("Europe/Berlin").local(at("2024-01-01 10:00:00"), 1), Some(at("2024-01-01 11:00:00")));
    assert_eq!(zone("+05:30").local(at("2024-01-01 10:00:00"), 1), Some(at("2024-01-01 15:30:00")));
    assert_eq!(instant("Europe/Berlin", "2024-07-01 12:00:00"), ("2024-07-01 10:00:00".into(), true));
    assert_eq!(instant("America/New_York", "2024-01-01 12:00:00"), ("2024-01-01 17:00:00".into(), true));
}

#[test]
fn the_examples_of_rfc_5545() {
    // RFC 5545, 3.3.5: 2007-11-04T01:30 in New York is EDT (UTC-4), the first of two; 2007-03-11T02:30 does
    // not exist and is 03:30 EDT.
    assert_eq!(instant("America/New_York", "2007-11-04 01:30:00"), ("2007-11-04 05:30:00".into(), true));
    assert_eq!(instant("America/New_York", "2007-03-11 02:30:00"), ("2007-03-11 07:30:00".into(), false));
}

#[test]
fn the_edges_of_gap_and_overlap() {
    assert_eq!(instant("Europe/Berlin", "2024-03-31 01:59:59"), ("2024-03-31 00:59:59".into(), true));
    assert_eq!(instant("Europe/Berlin", "2024-03-31 02:00:00"), ("2024-03-31 01:00:00".into(), false));
    assert_eq!(instant("Europe/Berlin", "2024-03-31 02:59:59"), ("2024-03-31 01:59:59".into(), false));
    assert_eq!(instant("Europe/Berlin", "2024-03-31 03:00:00"), ("2024-03-31 01:00:00".into(), true));
    assert_eq!(instant("Europe/Berlin", "2024-10-27 02:00:00"), ("2024-10-27 00:00:00".into(), true));
    assert_eq!(instant("Europe/Berlin", "2024-10-27 02:59:59"), ("2024-10-27 00:59:59".into(), true));
    assert_eq!(instant("Europe/Berlin", "2024-10-27 03:00:00"), ("2024-10-27 02:00:00".into(), true));
}

#[test]
fn far_away_there_is_no_local_time() {
    assert_eq!(zone("Europe/Berlin").local(i64::MAX, 1), None);
    assert_eq!(zone("Europe/Berlin").instant(i64::MIN, 1), None);
    // The last second that 64-bit nanoseconds can say is in 2262; an hour later there is none.
    assert_eq!(zone("Europe/Berlin").local(i64::MAX, 1_000_000_000), None);
    assert_eq!(zone("+00:00").local(i64::MAX, 1_000_000_000), Some(i64::MAX));
}
