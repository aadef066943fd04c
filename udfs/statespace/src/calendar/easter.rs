//! Easter Sunday of the western churches.

use std::ops::RangeInclusive;

use super::civil::Civil;

/// The years that [`easter_sunday`] answers for: from the first Easter after the Gregorian reform of October 1582 to
/// the last year of four digits. The rule has no end of its own.
pub const EASTER_YEARS: RangeInclusive<i64> = 1583..=9_999;

/// Easter Sunday of a year as days since 1970-01-01; `None` outside [`EASTER_YEARS`].
///
/// The Sunday after the ecclesiastical full moon that falls on or next after 21 March, in the Gregorian calendar.
/// Jean Meeus, *Astronomical Algorithms*, ch. 8 (p. 67), "Gregorian Easter", with its letters. He takes it from
/// Spencer Jones (1922), *General Astronomy*, pp. 73-74, and names *Butcher's Ecclesiastical Calendar* of 1876 as the
/// place it was first seen, after the *Journal of the British Astronomical Association* 88 (1977), p. 91. It is the
/// anonymous algorithm of 1876 that goes by the names of Meeus, Jones and Butcher, and has no exceptions.
pub fn easter_sunday(year: i64) -> Option<i64> {
    if !EASTER_YEARS.contains(&year) {
        return None;
    }
    // The place in the 19-year cycle of the moon, and the century with its leap days and its corrections of the moon.
    let a = year % 19;
    let (b, c) = (year / 100, year % 100);
    let (d, e) = (b / 4, b % 4);
    let f = (b + 8) / 25;
    let g = (b - f + 1) / 3;
    // Days from 21 March to the full moon, and from there to the Sunday before the one after it.
    let h = (19 * a + b - d - g + 15) % 30;
    let (i, k) = (c / 4, c % 4);
    let l = (32 + 2 * e + 2 * i - h - k) % 7;
    // One week earlier where the full moon would come a day too late for the 19-year cycle.
    let m = (a + 11 * h + 22 * l) / 451;
    let of_march_or_april = h + l - 7 * m + 114;
    let (month, day) = (of_march_or_april / 31, of_march_or_april % 31 + 1);
    Civil { year, month: month as u32, day: day as u32 }.to_days()
}
