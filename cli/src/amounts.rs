//! Amounts: memory as it is given on the command line, bytes and counts as they stand in reports.

use std::str::FromStr;

/// An amount of memory given on the command line, such as `512MB` or `2GiB`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Bytes(pub(crate) usize);

/// kB, MB and GB are powers of 1000; KiB, MiB and GiB powers of 1024.
const UNITS: [(&str, f64); 7] = [
    ("KiB", 1024.0),
    ("MiB", 1048576.0),
    ("GiB", 1073741824.0),
    ("KB", 1e3),
    ("MB", 1e6),
    ("GB", 1e9),
    ("B", 1.0),
];

impl FromStr for Bytes {
    type Err = String;

    fn from_str(given: &str) -> Result<Self, String> {
        let rule = || {
            format!("'{given}' is not an amount of memory: write a number and a unit, such as 512MB or 2GB")
        };
        let trimmed = given.trim();
        let split = trimmed.find(|c: char| c.is_ascii_alphabetic()).ok_or_else(rule)?;
        let (number, unit) = trimmed.split_at(split);
        let number: f64 = number.trim().parse().map_err(|_| rule())?;
        let (_, factor) = UNITS
            .iter()
            .find(|(name, _)| name.eq_ignore_ascii_case(unit))
            .ok_or_else(|| format!("'{unit}' is not a unit of memory; use KB, MB, GB, KiB, MiB or GiB"))?;
        let bytes = number * factor;
        if !bytes.is_finite() || bytes < 1e6 || bytes >= usize::MAX as f64 {
            return Err(format!("'{given}' is out of range: give at least 1MB"));
        }
        Ok(Self(bytes as usize))
    }
}

/// `bytes` for a report: `812 B`, `1.2 MB` (powers of 1000, as disks are sold and file managers show).
pub(crate) fn bytes(bytes: u64) -> String {
    let amount = bytes as f64;
    match bytes {
        0..1_000 => format!("{bytes} B"),
        1_000..1_000_000 => format!("{:.1} kB", amount / 1e3),
        1_000_000..1_000_000_000 => format!("{:.1} MB", amount / 1e6),
        _ => format!("{:.1} GB", amount / 1e9),
    }
}

/// `count` with its thousands set apart: `12,480`.
pub(crate) fn count(count: u64) -> String {
    let digits = count.to_string();
    let mut shown = String::with_capacity(digits.len() + digits.len() / 3);
    for (at, digit) in digits.chars().enumerate() {
        if at > 0 && (digits.len() - at).is_multiple_of(3) {
            shown.push(',');
        }
        shown.push(digit);
    }
    shown
}

/// `count` and its noun, `1 file` or `12,480 files`.
pub(crate) fn counted(number: u64, noun: &str) -> String {
    let plural = if number == 1 { "" } else { "s" };
    format!("{} {noun}{plural}", count(number))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn decimal_and_binary_units_differ() {
        assert_eq!("512MB".parse(), Ok(Bytes(512_000_000)));
        assert_eq!("2 gb".parse(), Ok(Bytes(2_000_000_000)));
        assert_eq!("1.5GiB".parse(), Ok(Bytes(1_610_612_736)));
    }

    #[test]
    fn what_is_no_amount_is_refused_with_the_rule() {
        for bad in ["", "512", "MB", "-3GB", "12 parsecs", "1e400GB", "10KB", "NaNMB"] {
            let told = bad.parse::<Bytes>().expect_err(bad);
            assert!(told.contains("MB"), "{bad}: {told}");
        }
    }

    #[test]
    fn amounts_are_shown_with_one_decimal() {
        assert_eq!(bytes(812), "812 B");
        assert_eq!(bytes(1_240_000), "1.2 MB");
        assert_eq!(bytes(3_000_000_000), "3.0 GB");
    }

    #[test]
    fn thousands_are_set_apart() {
        assert_eq!(
            ["1", "999", "1000", "1234567"].map(|n| count(n.parse().expect("number"))),
            ["1", "999", "1,000", "1,234,567"]
        );
        assert_eq!((counted(1, "file"), counted(2000, "file")), ("1 file".into(), "2,000 files".into()));
    }
}
