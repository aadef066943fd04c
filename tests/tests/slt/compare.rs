//! Comparing an answer with a record, line by line.

use sqllogictest::Normalizer;

/// Stands for anything within one line.
const IGNORED: &str = "<slt:ignore>";

/// True if each line is the expected one, but for the parts that the record ignores.
pub(crate) fn same_but_for_ignored(
    normalize: Normalizer,
    actual: &[Vec<String>],
    expected: &[String],
) -> bool {
    actual.len() == expected.len()
        && actual.iter().zip(expected).all(|(actual, expected)| {
            let actual = actual.iter().map(normalize).collect::<Vec<_>>().join(" ");
            fits(&actual, &normalize(expected))
        })
}

/// True if `line` is `pattern` with something in each place of [`IGNORED`].
fn fits(line: &str, pattern: &str) -> bool {
    let mut parts = pattern.split(IGNORED);
    let first = parts.next().unwrap_or_default();
    let Some(mut rest) = line.strip_prefix(first) else { return false };
    let mut parts = parts.collect::<Vec<_>>();
    let Some(last) = parts.pop() else { return rest.is_empty() };
    for part in parts {
        match rest.find(part) {
            Some(at) => rest = &rest[at + part.len()..],
            None => return false,
        }
    }
    rest.ends_with(last)
}

#[test]
fn what_is_not_ignored_must_be_the_same() {
    assert!(fits("rows=12, time=3ms", "rows=12, time=<slt:ignore>"));
    assert!(fits("a 1 b 2 c", "a <slt:ignore> b <slt:ignore> c"));
    assert!(fits("plain", "plain"));
    assert!(!fits("rows=13, time=3ms", "rows=12, time=<slt:ignore>"));
    assert!(!fits("a 1 b 2 c", "a <slt:ignore> d <slt:ignore> c"));
    assert!(!fits("plainer", "plain"));
    assert!(!fits("x end", "<slt:ignore> start"));
}
