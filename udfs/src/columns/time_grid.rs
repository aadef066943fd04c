//! The grid of one series in terms of the times its column stores.
//!
//! Without a zone, stored times are grid times. Zoned times stand for instants, and two lines can be laid
//! through them:
//!
//! - the **wall clock** of the zone, on which "every day at midnight" is even although the clock changes make
//!   one day 23 hours long and another 25;
//! - the line of **instants** (UTC), on which "every hour" is even, without a hole in March and without an hour
//!   that comes twice in October.
//!
//! The rule: the wall clock, if half or more of the distances are at least 20 hours and more than half of the
//! times (and no fewer than on UTC) share one time of day on it. With a stated step: the wall clock for months
//! and whole days, unless more of the times share their time of day on UTC; the instants for shorter steps.
//!
//! On the wall clock the grid's own time may not exist on some day. A stored time that is what such a local
//! time stands for (see [`super::zone`]) is on the grid. Times that were observed come back exactly as stored.

use stillwell_statespace::Trouble;
use stillwell_statespace::calendar::{Axis, Grid, Step};

use super::time::TimeKind;
use super::zone::Zone;

/// Seconds in a day.
const DAY: i64 = 86_400;
/// Shortest typical distance, in seconds, of times that keep to the wall clock: a day less any clock change.
const ABOUT_A_DAY: i64 = 20 * 3_600;

/// An even grid whose points are stored times.
#[derive(Debug, Clone)]
pub(crate) struct TimeGrid {
    grid: Grid,
    line: Line,
}

/// A grid without its times.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct GridRule {
    /// Distance between neighbouring points.
    pub(crate) step: Step,
    /// Day of the month of a grid of months, 31 for the last one.
    pub(crate) anchor_day: Option<u32>,
    /// Shared time of day on the wall clock of the zone, in ticks; absent for other grids.
    pub(crate) of_day: Option<i64>,
}

/// From stored times to grid times.
#[derive(Debug, Clone)]
enum Line {
    /// They are the same.
    Stored,
    /// Local time.
    Wall(Wall),
}

impl TimeGrid {
    /// See [`TimeKind::grid`].
    pub(super) fn try_new(kind: &TimeKind, stored: &[i64], every: Option<Step>) -> Result<Self, Trouble> {
        let (axis, line) = match (kind.axis(), kind.zone()) {
            (axis @ Axis::Ticks { per_second }, Some(zone)) => {
                match Wall::of(zone, per_second, stored, every) {
                    Some(wall) => (axis, Line::Wall(wall)),
                    None => (Axis::Instants { per_second }, Line::Stored),
                }
            }
            (axis, _) => (axis, Line::Stored),
        };
        let find = |times: &[i64]| match every {
            Some(step) => Grid::find_with_step(axis, step, times),
            None => Grid::find(axis, times),
        };
        let grid = match &line {
            Line::Stored => find(stored)?,
            Line::Wall(wall) => {
                let mut times: Vec<i64> = stored.iter().filter_map(|&time| wall.local(time)).collect();
                // Where clocks go back, local times need not ascend.
                times.sort_unstable();
                find(&times)?
            }
        };
        Ok(Self { grid, line })
    }

    /// What a grid is, beside one of its times: enough to go on from there.
    pub(crate) fn rule(&self) -> GridRule {
        GridRule {
            step: self.grid.step(),
            anchor_day: self.grid.anchor_day(),
            of_day: match &self.line {
                Line::Stored => None,
                Line::Wall(wall) => Some(wall.of_day),
            },
        }
    }

    /// The grid of this rule whose point 0 is `last`; `None` where that time has no place on it.
    pub(crate) fn resumed(kind: &TimeKind, rule: &GridRule, last: i64) -> Option<Self> {
        let (axis, line, first) = match (kind.axis(), kind.zone(), rule.of_day) {
            (axis @ Axis::Ticks { per_second }, Some(zone), Some(of_day)) => {
                let wall = Wall { zone, per_second, of_day, exceptions: Vec::new() };
                let first = wall.local(last)?;
                (axis, Line::Wall(wall), first)
            }
            (Axis::Ticks { per_second }, Some(_), None) => {
                (Axis::Instants { per_second }, Line::Stored, last)
            }
            (axis, ..) => (axis, Line::Stored, last),
        };
        let grid = Grid::resumed(axis, rule.step, rule.anchor_day, first);
        (grid.index_of(first) == Some(0)).then_some(Self { grid, line })
    }

    /// The grid itself: its step, name and seasons. Its times are local ones on the wall clock.
    pub(crate) fn grid(&self) -> &Grid {
        &self.grid
    }

    /// The point of a stored time; `None` if it is not on the grid or before its first point.
    pub(crate) fn index_of(&self, stored: i64) -> Option<usize> {
        match &self.line {
            Line::Stored => self.grid.index_of(stored),
            Line::Wall(wall) => self.grid.index_of(wall.local(stored)?),
        }
    }

    /// The stored time of a point; `None` beyond `i64`.
    pub(crate) fn time_at(&self, index: usize) -> Option<i64> {
        let time = self.grid.time_at(index)?;
        match &self.line {
            Line::Stored => Some(time),
            Line::Wall(wall) => wall.stored(time),
        }
    }

    /// A stored time as the grid sees it: local time on the wall clock, otherwise with a `Z` if zoned.
    pub(crate) fn format(&self, stored: i64) -> String {
        match &self.line {
            Line::Stored => self.grid.axis().format(stored),
            Line::Wall(wall) => self.grid.axis().format(wall.local(stored).unwrap_or(stored)),
        }
    }
}

/// The wall clock of a zone, for times that share a time of day.
#[derive(Debug, Clone)]
struct Wall {
    zone: Zone,
    per_second: i64,
    /// The shared time of day, in ticks.
    of_day: i64,
    /// Local and stored time of observed times that [`Zone::instant`] would not give back; ascending.
    exceptions: Vec<(i64, i64)>,
}

impl Wall {
    /// The wall clock, if the rule of the module says so and every time has a local one.
    fn of(zone: Zone, per_second: i64, stored: &[i64], every: Option<Step>) -> Option<Self> {
        let per_day = per_second.checked_mul(DAY)?;
        let locals: Vec<i64> =
            stored.iter().map(|&time| zone.local(time, per_second)).collect::<Option<_>>()?;
        let (of_day, share) = shared_time_of_day(&locals, per_day)?;
        let (_, share_on_utc) = shared_time_of_day(stored, per_day)?;
        let suits = match every {
            None => share * 2 > stored.len() && mostly_a_day_apart(stored, per_second),
            Some(Step::Months(_)) => true,
            Some(Step::Every(ticks)) => ticks % per_day == 0,
        };
        if !suits || share < share_on_utc {
            return None;
        }
        let mut wall = Self { zone, per_second, of_day, exceptions: Vec::new() };
        let odd = |&time: &i64| {
            wall.local(time).map(|local| (local, time)).filter(|&(l, t)| wall.stored(l) != Some(t))
        };
        let mut exceptions: Vec<(i64, i64)> = stored.iter().filter_map(odd).collect();
        exceptions.sort_unstable();
        wall.exceptions = exceptions;
        Some(wall)
    }

    /// The local time of a stored time, put back to the shared time of day where clocks jumped over that.
    fn local(&self, stored: i64) -> Option<i64> {
        let local = self.zone.local(stored, self.per_second)?;
        let per_day = self.per_second * DAY;
        if local.rem_euclid(per_day) == self.of_day {
            return Some(local);
        }
        // A jump just before midnight moves the time into the next day.
        let skipped = [0, 1].into_iter().find_map(|days_back| {
            let midnight = local.div_euclid(per_day).checked_sub(days_back)?.checked_mul(per_day)?;
            let meant = midnight.checked_add(self.of_day)?;
            (self.zone.instant(meant, self.per_second)? == (stored, false)).then_some(meant)
        });
        Some(skipped.unwrap_or(local))
    }

    /// The stored time of a local time.
    fn stored(&self, local: i64) -> Option<i64> {
        match self.exceptions.binary_search_by_key(&local, |&(local, _)| local) {
            Ok(at) => self.exceptions.get(at).map(|&(_, stored)| stored),
            Err(_) => self.zone.instant(local, self.per_second).map(|(instant, _)| instant),
        }
    }
}

/// The most frequent time of day (the earliest on a tie) and how many share it; `None` without times.
fn shared_time_of_day(times: &[i64], per_day: i64) -> Option<(i64, usize)> {
    let mut of_day: Vec<i64> = times.iter().map(|time| time.rem_euclid(per_day)).collect();
    of_day.sort_unstable();
    let runs = of_day.chunk_by(|a, b| a == b).filter_map(|run| run.first().map(|&time| (time, run.len())));
    runs.max_by_key(|&(time, count)| (count, std::cmp::Reverse(time)))
}

/// True if half or more of the distances are at least about a day; also for a single time.
fn mostly_a_day_apart(stored: &[i64], per_second: i64) -> bool {
    let Ok(about_a_day) = u64::try_from(per_second.saturating_mul(ABOUT_A_DAY)) else { return false };
    let long =
        stored.iter().zip(stored.iter().skip(1)).filter(|(a, b)| b.abs_diff(**a) >= about_a_day).count();
    long * 2 >= stored.len().saturating_sub(1)
}

#[cfg(test)]
mod tests;
