//! An even grid of times: point numbers to times and back.

use super::axis::Axis;
use super::civil::Civil;
use super::step::Step;

/// Day of the month that stands for "the last one", whatever its number.
pub(super) const MONTH_END: u32 = 31;

/// An even grid of times. Point 0 is the first time; the grid has no end.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Grid {
    axis: Axis,
    first: i64,
    rule: Rule,
}

/// How the times follow one another.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
enum Rule {
    /// A fixed number of axis units, at least 1.
    Every(i64),
    /// The same day of every `months`-th month (at least 1) since `month`, clipped in months that are too short.
    Calendar { months: u32, month: i64, day: u32, of_day: i64 },
}

impl Grid {
    /// The grid that starts at `first` and goes on by `step`.
    ///
    /// A first time on the last day of its month makes a grid of month ends (30 April, 31 May, ...). Where
    /// the other times should decide that, use [`Grid::find_with_step`]. A step below 1 counts as 1, and
    /// months on [`Axis::Integer`] count as units.
    pub fn with_step(axis: Axis, step: Step, first: i64) -> Self {
        let split = axis.split(first);
        match (step, split) {
            (Step::Every(n), _) => Self { axis, first, rule: Rule::Every(n.max(1)) },
            (Step::Months(n), None) => Self { axis, first, rule: Rule::Every(i64::from(n.max(1))) },
            (Step::Months(n), Some((date, of_day))) => {
                let day = if date.is_month_end() { MONTH_END } else { date.day };
                Self::by_calendar(axis, n, first, (date.month_index(), day, of_day))
            }
        }
    }

    /// The calendar grid through `first`, which lies at (month index, day of the month, units since midnight).
    pub(super) fn by_calendar(axis: Axis, months: u32, first: i64, at: (i64, u32, i64)) -> Self {
        let (month, day, of_day) = at;
        Self { axis, first, rule: Rule::Calendar { months: months.max(1), month, day, of_day } }
    }

    /// The grid that goes on from `first`, one of the times of a grid with this step and [`Self::anchor_day`].
    pub fn resumed(axis: Axis, step: Step, anchor_day: Option<u32>, first: i64) -> Self {
        match (step, axis.split(first), anchor_day) {
            (Step::Months(n), Some((date, of_day)), Some(day)) => {
                Self::by_calendar(axis, n, first, (date.month_index(), day.clamp(1, MONTH_END), of_day))
            }
            _ => Self::with_step(axis, step, first),
        }
    }

    /// The day of the month on which a grid of months stands, 31 for the last one; `None` for other grids.
    pub fn anchor_day(&self) -> Option<u32> {
        match self.rule {
            Rule::Calendar { day, .. } => Some(day),
            Rule::Every(_) => None,
        }
    }

    /// What the times count.
    pub fn axis(&self) -> Axis {
        self.axis
    }

    /// Distance between neighbouring points.
    pub fn step(&self) -> Step {
        match self.rule {
            Rule::Every(n) => Step::Every(n),
            Rule::Calendar { months, .. } => Step::Months(months),
        }
    }

    /// The time of point 0.
    pub fn first(&self) -> i64 {
        self.first
    }

    /// True where the points are the last days of their months.
    pub fn month_end(&self) -> bool {
        matches!(self.rule, Rule::Calendar { day: MONTH_END, .. })
    }

    /// The point number of a time; `None` if it is not on the grid or before its first point.
    pub fn index_of(&self, time: i64) -> Option<usize> {
        let (distance, step) = match self.rule {
            Rule::Every(n) => (i128::from(time) - i128::from(self.first), i128::from(n)),
            Rule::Calendar { months, month, day, of_day } => {
                let (date, its_of_day) = self.axis.split(time)?;
                let index = date.month_index();
                if its_of_day != of_day || Civil::in_month(index, day) != date {
                    return None;
                }
                (i128::from(index) - i128::from(month), i128::from(months))
            }
        };
        if distance < 0 || distance % step != 0 { None } else { usize::try_from(distance / step).ok() }
    }

    /// The time of a point; `None` beyond `i64`.
    pub fn time_at(&self, index: usize) -> Option<i64> {
        let index = i128::from(i64::try_from(index).ok()?);
        match self.rule {
            Rule::Every(n) => i64::try_from(i128::from(self.first) + i128::from(n) * index).ok(),
            Rule::Calendar { months, month, day, of_day } => {
                let month = i64::try_from(i128::from(month) + i128::from(months) * index).ok()?;
                self.axis.join(Civil::in_month(month, day), of_day)
            }
        }
    }

    /// The step in words: 'week', 'month', 'quarter', '15 minutes', 'month end', 'quarter, at month end', 'step 5'.
    pub fn describe(&self) -> String {
        let step = self.step().describe(self.axis);
        match self.rule {
            Rule::Calendar { months: 1, day: MONTH_END, .. } => "month end".to_owned(),
            // A step of whole years meets one month only, whose end is a fixed day unless it is February.
            Rule::Calendar { months, month, day: MONTH_END, .. }
                if months % 12 != 0 || month.rem_euclid(12) == 1 =>
            {
                format!("{step}, at month end")
            }
            Rule::Calendar { .. } | Rule::Every(_) => step,
        }
    }

    /// The seasonal periods, in steps, that the grid suggests, most telling first: month 12, quarter 4, week
    /// 52.18, day 7 and 365.25, hour 24 and 168, n minutes a day's and a week's worth; year and plain counts none.
    pub fn periods(&self) -> Vec<f64> {
        self.step().periods(self.axis)
    }
}
