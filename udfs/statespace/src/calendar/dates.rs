//! A set of days, such as the holidays of a country or the days of a fair.

use super::period::Period;

/// Days, each once, whatever the list they were collected from repeats.
///
/// Days are day numbers: days since 1970-01-01. The set is kept in order, so that a period finds its part of it in a
/// few comparisons: the same list usually goes with every row of a table.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Dates {
    ascending: Vec<i64>,
}

impl FromIterator<i64> for Dates {
    fn from_iter<I: IntoIterator<Item = i64>>(days: I) -> Self {
        let mut ascending: Vec<i64> = days.into_iter().collect();
        ascending.sort_unstable();
        ascending.dedup();
        Self { ascending }
    }
}

impl Dates {
    /// Those that fall in a period, in order.
    pub fn within(&self, period: Period) -> &[i64] {
        let before = |end: i64| self.ascending.partition_point(|&day| day < end);
        &self.ascending[before(period.first())..before(period.end())]
    }
}
