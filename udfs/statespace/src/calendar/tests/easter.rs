//! Easter against a published table, a second algorithm and a second program.

use super::super::civil::Civil;
use super::*;

/// Easter dates from 1600 to 2099 as the US Census Bureau publishes them; where this copy comes from stands in
/// `tests/data/README.md`.
const CENSUS: &str = include_str!("../../../tests/data/calendar/easter_1600_2099.csv");

/// What `tests/data/calendar/reference.py` prints for the years 1583 to 4099 with python-dateutil 4.0.0, whose
/// `easter()` shares neither form nor letters with ours.
const CHECKSUM: u64 = 0x3b3c_446c_e9d5_d064;
/// How many of those years have Easter on 22 March, 23 March, ..., 25 April (the same run).
const YEARS_BY_DATE: [usize; 35] = [
    15, 14, 24, 58, 73, 59, 65, 86, 98, 92, 78, 68, 81, 92, 99, 87, 70, 73, 87, 102, 90, 76, 68, 84, 98, 96,
    81, 79, 89, 92, 89, 58, 28, 42, 26,
];

#[test]
fn five_centuries_of_the_published_table() {
    let mut years = 0;
    for line in CENSUS.lines().skip(1) {
        let fields: Vec<i64> = line.split(',').map(|field| field.parse().unwrap()).collect();
        let [year, month, of_month] = fields[..] else { panic!("three fields, not '{line}'") };
        assert_eq!(easter_sunday(year), Some(day(year, month as u32, of_month as u32)), "{line}");
        years += 1;
    }
    assert_eq!(years, 500);
}

/// Gauss's rule in the closed form of H. Lichtenberg (1997), *Zur Interpretation der Gaußschen Osterformel und ihrer
/// Ausnahmeregeln*, Historia Mathematica 24, pp. 441-444: his corrections replace Gauss's two exceptions. From
/// memory, and in agreement with python-dateutil 4.0.0 over 1583 to 4099. The result counts days from 1 March = 1.
fn lichtenberg(year: i64) -> i64 {
    let k = year / 100;
    let m = 15 + (3 * k + 3) / 4 - (8 * k + 13) / 25;
    let s = 2 - (3 * k + 3) / 4;
    let a = year % 19;
    let d = (19 * a + m) % 30;
    let r = (d + a / 11) / 29;
    let full_moon = 21 + d - r;
    let first_sunday = 7 - (year + year / 4 + s).rem_euclid(7);
    full_moon + 7 - (full_moon - first_sunday).rem_euclid(7)
}

#[test]
fn every_year_as_gauss_and_lichtenberg_have_it() {
    for year in EASTER_YEARS {
        assert_eq!(easter_sunday(year), Some(day(year, 3, 1) + lichtenberg(year) - 1), "{year}");
    }
}

#[test]
fn every_year_to_4099_as_a_second_program_has_it() {
    let mut checksum = 0xcbf2_9ce4_8422_2325_u64;
    let mut years_by_date = [0; 35];
    for year in 1583..=4099 {
        let sunday = easter_sunday(year).unwrap();
        // FNV-1a, as in the script.
        for byte in Axis::Days.format(sunday).bytes() {
            checksum = (checksum ^ u64::from(byte)).wrapping_mul(0x0100_0000_01b3);
        }
        years_by_date[(sunday - day(year, 3, 22)) as usize] += 1;
    }
    assert_eq!(years_by_date, YEARS_BY_DATE);
    assert_eq!(checksum, CHECKSUM);
}

#[test]
fn it_is_a_sunday_of_the_five_weeks_it_may_fall_in() {
    for year in EASTER_YEARS {
        let sunday = easter_sunday(year).unwrap();
        // 1970-01-04 was a Sunday.
        assert_eq!((sunday - 3) % 7, 0, "{year}");
        assert!((day(year, 3, 22)..=day(year, 4, 25)).contains(&sunday), "{year}");
    }
}

#[test]
fn the_extremes_that_meeus_names() {
    // Meeus (1982), Astronomical Formulae for Calculators, 2nd ed., ch. 4: 22 March as in 1818 and 2285, 25 April as in
    // 1886, 1943 and 2038.
    for (years, month, of_month) in [(&[1818, 2285][..], 3, 22), (&[1886, 1943, 2038][..], 4, 25)] {
        for &year in years {
            let sunday = Civil::from_days(easter_sunday(year).unwrap());
            assert_eq!(sunday, Civil { year, month, day: of_month });
        }
    }
}

#[test]
fn other_years_have_no_answer() {
    for year in [i64::MIN, -1, 0, 1582, 10_000, i64::MAX] {
        assert_eq!(easter_sunday(year), None);
    }
}
