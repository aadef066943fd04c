//! From the times of a series to its grid.
//!
//! Rules beside those of the pattern module, which judges every step:
//!
//! - One time shows no step. Two show one: calendar months if both are on the same day of the month.
//! - A calendar grid (month, quarter, year, any number of months) needs the same time of day throughout and
//!   the same day of the month, clipped where a month is too short (31, 28, 31, 30, or 30, 28, 30). Where
//!   the last day of the month fits as well as any fixed day, the last day it is: 30 April, 30 June are month ends.
//! - Gaps are allowed anywhere; the step is what all distances have in common. Working days (Monday to
//!   Friday) are a daily grid with gaps at the weekends, and so is "every Tuesday and Friday".
//! - A time off the grid that most others are on is named, with the grid.

use super::axis::Axis;
use super::grid::{Grid, MONTH_END};
use super::pattern::{self, Pattern};
use super::step::Step;
use crate::Trouble;

/// Most points a grid may have between its first and its last time.
pub const MAX_POINTS: usize = 10_000_000;

impl Grid {
    /// Discovers the grid of at least two times in ascending order without repetition.
    ///
    /// Errors: [`Trouble::NoGrid`] with fewer than two times, without a believable step, or with more than
    /// [`MAX_POINTS`] points; [`Trouble::OffGrid`] with the first time that is off the grid of the others;
    /// [`Trouble::DuplicateTime`] on a repeated time.
    pub fn find(axis: Axis, times: &[i64]) -> Result<Self, Trouble> {
        in_order(axis, times)?;
        let (first, last) = match times {
            [] => return Err(no_grid("there is no time at all".to_owned())),
            [time] => {
                let time = axis.format(*time);
                return Err(no_grid(format!("there is one time, {time}, and one time shows no step")));
            }
            [first, .., last] => (*first, *last),
        };
        let dates = if far_apart(axis, times) { MonthLine::of(axis, times) } else { None };
        if let Some(dates) = dates.as_ref().filter(|dates| dates.members == times.len()) {
            return match dates.grid(axis, times) {
                Ok(grid) => grid.checked(times),
                Err(step) => Err(uneven(axis, times.len(), (first, last), &step)),
            };
        }
        let fixed = match pattern::of(times) {
            Pattern::Even { step } => return Self::with_step(axis, Step::Every(step), first).checked(times),
            Pattern::Strays { step, member } => Ok(Self::with_step(axis, Step::Every(step), member)),
            Pattern::Uneven { finest } => {
                Err(uneven(axis, times.len(), (first, last), &Step::Every(finest).describe(axis)))
            }
            Pattern::TooWide => {
                let (first, last) = (axis.format(first), axis.format(last));
                Err(no_grid(format!("{first} and {last} are too far apart for any step")))
            }
        };
        let by_date = dates.filter(|d| d.members * 2 > times.len()).and_then(|d| d.grid(axis, times).ok());
        match (fixed, by_date) {
            // Both leave some times out: the one that leaves out fewer is what was meant.
            (Ok(fixed), Some(by_date)) if fixed.strays(times).count() < by_date.strays(times).count() => {
                fixed.checked(times)
            }
            (_, Some(by_date)) => by_date.checked(times),
            (fixed, None) => fixed?.checked(times),
        }
    }

    /// The grid of a given step through the times (ascending, without repetition): the phase, the day of the
    /// month and the time of day that most of them share.
    ///
    /// Errors as for [`Grid::find`]; one time is enough here.
    pub fn find_with_step(axis: Axis, step: Step, times: &[i64]) -> Result<Self, Trouble> {
        in_order(axis, times)?;
        let grid = match step {
            Step::Every(n) => {
                pattern::phase(times, n.max(1)).map(|(member, _)| Self::with_step(axis, step, member))
            }
            Step::Months(n) => match MonthLine::of(axis, times) {
                Some(dates) => dates.grid_of(axis, times, n.max(1)),
                None => times.first().map(|&first| Self::with_step(axis, step, first)),
            },
        };
        grid.ok_or_else(|| no_grid("there is no time at all".to_owned()))?.checked(times)
    }

    /// The times that are not on the grid.
    fn strays(&self, times: &[i64]) -> impl Iterator<Item = i64> {
        times.iter().copied().filter(|&time| self.index_of(time).is_none())
    }

    /// Itself, if every time is on it and the points are not too many.
    fn checked(self, times: &[i64]) -> Result<Self, Trouble> {
        let axis = self.axis();
        let mut strays = self.strays(times);
        if let Some(stray) = strays.next() {
            let more = strays.count();
            let at = axis.format(stray);
            return Err(Trouble::OffGrid {
                at: if more == 0 { at } else { format!("{at} (the first of {})", more + 1) },
                grid: format!("{} from {}", self.describe(), axis.format(self.first())),
            });
        }
        let points =
            times.last().and_then(|&last| self.index_of(last)).map_or(0, |index| index.saturating_add(1));
        if points > MAX_POINTS {
            let last = times.last().copied().unwrap_or_default();
            return Err(no_grid(format!(
                "from {} to {} its grid ({}) would have {points} points, more than the {MAX_POINTS} a series may have",
                axis.format(self.first()),
                axis.format(last),
                self.describe(),
            )));
        }
        Ok(self)
    }
}

/// The months of the times that share the most common day of the month and time of day.
struct MonthLine {
    /// Month index of each member, ascending.
    months: Vec<i64>,
    /// The members' day of the month; [`MONTH_END`] for the last one.
    day: u32,
    /// The members' time of day, in axis units.
    of_day: i64,
    /// How many times are members.
    members: usize,
}

impl MonthLine {
    /// `None` on [`Axis::Integer`] or without times.
    fn of(axis: Axis, times: &[i64]) -> Option<Self> {
        let dated: Vec<_> = times.iter().filter_map(|&time| axis.split(time)).collect();
        let of_day = most_common(dated.iter().map(|&(_, of_day)| of_day))?;
        let dates: Vec<_> = dated.iter().filter(|d| d.1 == of_day).map(|&(date, _)| date).collect();
        let fits = |day: u32| {
            dates.iter().filter(|date| date.day == day || (date.day < day && date.is_month_end())).count()
        };
        let day = (1..=MONTH_END).max_by_key(|&day| (fits(day), day == MONTH_END, std::cmp::Reverse(day)))?;
        let months: Vec<i64> = dates
            .iter()
            .filter(|date| date.day == day || (date.day < day && date.is_month_end()))
            .map(|date| date.month_index())
            .collect();
        Some(Self { members: months.len(), months, day, of_day })
    }

    /// The grid of the members' own step, strays among them allowed; otherwise the finest step in words.
    fn grid(&self, axis: Axis, times: &[i64]) -> Result<Grid, String> {
        let step = match pattern::of(&self.months) {
            Pattern::Even { step } | Pattern::Strays { step, .. } => step,
            Pattern::Uneven { finest } => return Err(months_in_words(axis, finest)),
            Pattern::TooWide => return Err("month".to_owned()),
        };
        u32::try_from(step)
            .ok()
            .and_then(|months| self.grid_of(axis, times, months))
            .ok_or_else(|| months_in_words(axis, step))
    }

    /// The grid of every `months`-th month that most members are on.
    fn grid_of(&self, axis: Axis, times: &[i64], months: u32) -> Option<Grid> {
        let (month, _) = pattern::phase(&self.months, i64::from(months))?;
        let at = (month, self.day, self.of_day);
        let through = Grid::by_calendar(axis, months, times.first().copied()?, at);
        Some(Grid::by_calendar(axis, months, through.time_at(0)?, at))
    }
}

/// A number of months in words.
fn months_in_words(axis: Axis, months: i64) -> String {
    u32::try_from(months).map_or_else(|_| format!("{months} months"), |n| Step::Months(n).describe(axis))
}

/// True if half or more of the distances are at least the shortest month: otherwise no calendar step can fit.
fn far_apart(axis: Axis, times: &[i64]) -> bool {
    let Some(month) = axis.per_day().and_then(|per_day| u64::try_from(per_day.saturating_mul(28)).ok())
    else {
        return false;
    };
    let long = times.iter().zip(times.iter().skip(1)).filter(|(a, b)| b.abs_diff(**a) >= month).count();
    long * 2 >= times.len().saturating_sub(1)
}

/// The value that occurs most often, the smallest on a tie.
fn most_common(values: impl Iterator<Item = i64>) -> Option<i64> {
    let mut values: Vec<i64> = values.collect();
    values.sort_unstable();
    let runs = values
        .chunk_by(|a, b| a == b)
        .filter_map(|run| run.first().map(|&v| (run.len(), std::cmp::Reverse(v))));
    runs.max().map(|(_, std::cmp::Reverse(value))| value)
}

/// The precondition of everything here.
fn in_order(axis: Axis, times: &[i64]) -> Result<(), Trouble> {
    for (a, b) in times.iter().zip(times.iter().skip(1)) {
        if a == b {
            return Err(Trouble::DuplicateTime { at: axis.format(*a) });
        }
        if a > b {
            let (a, b) = (axis.format(*a), axis.format(*b));
            return Err(no_grid(format!("{a} comes before {b}, but times must ascend")));
        }
    }
    Ok(())
}

fn no_grid(why: String) -> Trouble {
    Trouble::NoGrid { why }
}

fn uneven(axis: Axis, n: usize, (first, last): (i64, i64), finest: &str) -> Trouble {
    no_grid(format!(
        "the {n} times from {} to {} have nothing longer in common than {finest}, and most points of such a grid would be empty",
        axis.format(first),
        axis.format(last)
    ))
}
