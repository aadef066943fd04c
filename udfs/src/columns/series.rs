//! From the rows of one series to the series on its even grid.
//!
//! Times become grid points, gaps in the grid become missing points, and what stands before the first
//! observation is dropped. The history ends with the last observation; later rows, whose `observed` is NULL,
//! carry the plan of the drivers. What cannot be put on a grid is [`Unplaced`], with the reason.

use stillwell_statespace::calendar::Step;
use stillwell_statespace::{Series, Trouble};

use super::groups::Group;
use super::time::TimeKind;
use super::time_grid::TimeGrid;

/// A series on its grid.
#[derive(Debug, Clone)]
pub(crate) struct Placed {
    /// The numbers.
    pub(crate) series: Series,
    grid: TimeGrid,
    /// Grid point of the first observation.
    first: usize,
    /// Grid points after the last observation up to the last row.
    tail: usize,
}

impl Placed {
    /// Points of the history: first to last observation, gaps included.
    pub(crate) fn len(&self) -> usize {
        self.series.observed.len()
    }

    /// Grid points after the last observation up to the last row.
    pub(crate) fn tail(&self) -> usize {
        self.tail
    }

    /// The grid.
    pub(crate) fn grid(&self) -> &TimeGrid {
        &self.grid
    }

    /// A point as people write it, counted from the first observation.
    pub(crate) fn describe_time(&self, index: usize) -> Option<String> {
        self.time_at(index).map(|time| self.grid.format(time))
    }

    /// Grid point of the last observation.
    pub(crate) fn last_point(&self) -> usize {
        (self.first + self.len()).saturating_sub(1)
    }

    /// Time of point `index`, counted from the first observation; `None` beyond the range of the time type.
    pub(crate) fn time_at(&self, index: usize) -> Option<i64> {
        self.grid.time_at(self.first.checked_add(index)?)
    }

    /// The point of the history that a stored time is, counted from the first observation; `None` before that, after the
    /// last one, and off the grid.
    pub(crate) fn index_of(&self, stored: i64) -> Option<usize> {
        let index = self.grid.index_of(stored)?.checked_sub(self.first)?;
        (index < self.len()).then_some(index)
    }

    /// Times of all points of the history.
    pub(crate) fn times(&self) -> impl Iterator<Item = Option<i64>> {
        (0..self.len()).map(|index| self.time_at(index))
    }
}

/// A series that could not be put on a grid, or has nothing on it.
#[derive(Debug, Clone)]
pub(crate) struct Unplaced {
    /// Why.
    pub(crate) trouble: Trouble,
    /// The grid, where it is known all the same, and the number of its points up to the last row.
    pub(crate) grid: Option<Box<(TimeGrid, usize)>>,
}

impl From<Trouble> for Unplaced {
    fn from(trouble: Trouble) -> Self {
        Self { trouble, grid: None }
    }
}

/// Puts the rows of one series on their grid.
///
/// `time` is the type of the time column, `every` the step, if the query states it. The first `constant` of the group's drivers have constant
/// coefficients, the rest drifting ones.
///
/// # Errors
/// NULL times, repeated times, times off the grid, no grid, no observation.
pub(crate) fn place(
    group: &Group,
    time: &TimeKind,
    every: Option<Step>,
    constant: usize,
) -> Result<Placed, Unplaced> {
    Placer::new(time, every, constant).place(group)
}

/// Puts series on their grids, one after the other.
///
/// Most series of a warehouse have the very times of the one before; its grid and its points are then taken over
/// instead of being found again. They depend on the times alone, so that nothing changes by it.
#[derive(Debug)]
pub(crate) struct Placer<'a> {
    time: &'a TimeKind,
    every: Option<Step>,
    constant: usize,
    last: Option<Laid>,
}

/// Times on their grid.
#[derive(Debug)]
struct Laid {
    times: Vec<Option<i64>>,
    grid: TimeGrid,
    points: Vec<usize>,
    /// Each point follows the one before.
    unbroken: bool,
}

impl Laid {
    fn try_new(times: &[Option<i64>], kind: &TimeKind, every: Option<Step>) -> Result<Self, Trouble> {
        let known = times.iter().copied().flatten().collect::<Vec<_>>();
        if known.len() < times.len() {
            return Err(Trouble::MissingTime { rows: times.len() - known.len() });
        }
        let grid = kind.grid(&known, every)?;
        let mut points = Vec::with_capacity(known.len());
        for &time in &known {
            let off = || Trouble::OffGrid { at: grid.format(time), grid: grid.grid().describe() };
            points.push(grid.index_of(time).ok_or_else(off)?);
        }
        let unbroken = points.windows(2).all(|pair| pair[1] == pair[0] + 1);
        Ok(Self { times: times.to_vec(), grid, points, unbroken })
    }

    /// The values on the grid points from that of row `first_row` up to `end`, NaN where there is no row.
    fn spread(&self, values: &[f64], first_row: usize, end: usize) -> Vec<f64> {
        let first = self.points[first_row];
        let count = end - first + 1;
        if self.unbroken {
            return values.iter().skip(first_row).take(count).copied().collect();
        }
        let mut spread = vec![f64::NAN; count];
        for (&point, &value) in self.points.iter().zip(values) {
            // Rows before the first observation, and plan rows where only the history is wanted, fall out.
            if let Some(place) = point.checked_sub(first).and_then(|at| spread.get_mut(at)) {
                *place = value;
            }
        }
        spread
    }
}

impl<'a> Placer<'a> {
    /// See [`place`] for the arguments.
    pub(crate) fn new(time: &'a TimeKind, every: Option<Step>, constant: usize) -> Self {
        Self { time, every, constant, last: None }
    }

    /// See [`place`].
    ///
    /// # Errors
    /// See [`place`].
    pub(crate) fn place(&mut self, group: &Group) -> Result<Placed, Unplaced> {
        let laid = match self.last.take().filter(|last| last.times == group.times) {
            Some(last) => last,
            None => Laid::try_new(&group.times, self.time, self.every)?,
        };
        let laid = self.last.insert(laid);
        let ends = (laid.points.last(), observed_ends(&group.observed));
        let (Some(&final_point), Some((first_row, last_row))) = ends else {
            let grid = laid.points.last().map(|&last| Box::new((laid.grid.clone(), last.saturating_add(1))));
            return Err(Unplaced { trouble: Trouble::AllMissing, grid });
        };
        let (first, last) = (laid.points[first_row], laid.points[last_row]);
        let spread = |values: &Vec<f64>| laid.spread(values, first_row, final_point);
        let mut drivers = group.drivers.iter().map(spread).collect::<Vec<_>>();
        let drifting_drivers = drivers.split_off(self.constant.min(drivers.len()));
        Ok(Placed {
            series: Series {
                observed: laid.spread(&group.observed, first_row, last),
                drivers,
                drifting_drivers,
            },
            grid: laid.grid.clone(),
            first,
            tail: final_point - last,
        })
    }
}

/// Rows of the first and the last observation.
fn observed_ends(observed: &[f64]) -> Option<(usize, usize)> {
    let first = observed.iter().position(|value| !value.is_nan())?;
    let last = observed.iter().rposition(|value| !value.is_nan())?;
    Some((first, last))
}

#[cfg(test)]
mod tests;
