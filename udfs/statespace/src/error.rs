//! What can be wrong: with a request (every series would suffer) or with one series (only its own row does).

use std::fmt;

use crate::transform::Transform;

/// Why one series could not be fitted. [`Trouble::status`] is the closed list that results carry;
/// the `Display` text is the sentence with the value, the place and the remedy.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Trouble {
    /// No observation at all.
    AllMissing,
    /// Fewer observations than the structure needs.
    TooShort {
        /// Observed points that the structure needs.
        needed: usize,
        /// Observed points that there are.
        got: usize,
    },
    /// The series does not reach over one full period of a season that was asked for.
    ShorterThanSeason {
        /// The period in steps.
        period: f64,
        /// Grid points from the first to the last observation.
        points: usize,
    },
    /// Every observation has the same value: no variance can be estimated.
    Constant {
        /// The value.
        value: f64,
    },
    /// An infinite observation.
    NotFinite {
        /// Grid point, from 0.
        index: usize,
    },
    /// A magnitude whose square leaves the range of double precision.
    TooLarge {
        /// Grid point, from 0.
        index: usize,
        /// The value there.
        value: f64,
    },
    /// A transform was asked of a value that it does not take: a logarithm of a value that is not above zero.
    NotPositive {
        /// Grid point, from 0.
        index: usize,
        /// The value there.
        value: f64,
        /// The transform.
        transform: Transform,
    },
    /// A driver has no (finite) value at a point of the history.
    DriverGap {
        /// Name of the driver.
        driver: String,
        /// Grid point, from 0.
        index: usize,
    },
    /// A driver has no (finite) value at a step of the horizon.
    NoDriverPlan {
        /// Name of the driver.
        driver: String,
        /// Step of the horizon, from 1.
        step: usize,
    },
    /// Drivers (with the level, slope and season) that repeat one another: no data can tell them apart.
    CollinearDrivers {
        /// Name of the first driver that adds nothing.
        driver: String,
    },
    /// A diffuse state of a system given as matrices about which the observations say nothing.
    UndeterminedState {
        /// Number of the state, from 1.
        state: usize,
    },
    /// The structure reproduces the data to rounding: no variance is left to estimate.
    ExactFit,
    /// The likelihood could not be evaluated where the structure needs it.
    Numerical {
        /// The sentence about it.
        what: &'static str,
    },
    /// Two rows of the series have the same time.
    DuplicateTime {
        /// The time, ISO 8601 or a number.
        at: String,
    },
    /// A row has no time.
    MissingTime {
        /// How many rows.
        rows: usize,
    },
    /// A time that is not on the grid of the series.
    OffGrid {
        /// The time, ISO 8601 or a number.
        at: String,
        /// The grid in words.
        grid: String,
    },
    /// A new row of a fit that is advanced does not come after what the fit has seen.
    NotAfter {
        /// Its time.
        at: String,
        /// The last observation of the fit.
        last: String,
    },
    /// Lists of one call that should go together one by one have different lengths.
    UnequalLists {
        /// Name of the list.
        name: String,
        /// Its length.
        got: usize,
        /// The length of the list of times.
        times: usize,
    },
    /// A stored fit whose contents do not go together.
    DamagedFit {
        /// What does not.
        what: String,
    },
    /// No even grid fits the times.
    NoGrid {
        /// What speaks against one.
        why: String,
    },
}

impl Trouble {
    /// The short words of the `status` column. The list is closed; see `udfs/docs/functions.md`.
    pub fn status(&self) -> &'static str {
        match self {
            Self::AllMissing => "all missing",
            Self::TooShort { .. } | Self::ShorterThanSeason { .. } => "too short",
            Self::Constant { .. } => "constant",
            Self::NotFinite { .. } => "not finite",
            Self::TooLarge { .. } => "too large",
            Self::NotPositive { .. } => "not positive",
            Self::DriverGap { .. } => "driver gap",
            Self::NoDriverPlan { .. } => "no driver plan",
            Self::CollinearDrivers { .. } => "collinear drivers",
            Self::UndeterminedState { .. } => "undetermined state",
            Self::ExactFit => "exact fit",
            Self::Numerical { .. } => "numerical trouble",
            Self::DuplicateTime { .. } => "duplicate time",
            Self::MissingTime { .. } => "missing time",
            Self::OffGrid { .. } => "off the grid",
            Self::NotAfter { .. } => "not after",
            Self::UnequalLists { .. } => "unequal lists",
            Self::DamagedFit { .. } => "damaged fit",
            Self::NoGrid { .. } => "no grid",
        }
    }

    /// Every status there is, 'ok' first.
    pub const STATUSES: [&'static str; 20] = [
        "ok",
        "all missing",
        "too short",
        "constant",
        "not finite",
        "too large",
        "not positive",
        "driver gap",
        "no driver plan",
        "collinear drivers",
        "undetermined state",
        "exact fit",
        "numerical trouble",
        "duplicate time",
        "missing time",
        "off the grid",
        "not after",
        "unequal lists",
        "damaged fit",
        "no grid",
    ];
}

impl fmt::Display for Trouble {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::AllMissing => write!(f, "no point is observed; nothing can be fitted"),
            Self::TooShort { needed, got } => write!(
                f,
                "{got} observed points, but this structure needs at least {needed}; ask for a simpler trend, no season or fewer drivers"
            ),
            Self::ShorterThanSeason { period, points } => write!(
                f,
                "the series has {points} steps, less than one season of {}; nothing can be said about the season: use season => 0, or 'auto', which asks for three full periods",
                crate::structure::period_label(*period)
            ),
            Self::Constant { value } => write!(
                f,
                "every observed value is {value}; a series that never moves has no variance to estimate"
            ),
            Self::NotFinite { index } => write!(
                f,
                "the observed value at grid point {index} (from 0) is infinite; make it NULL or mend it"
            ),
            Self::TooLarge { index, value } => write!(
                f,
                "the observed value {value:e} at grid point {index} (from 0) is beyond 1e150 in size; rescale the column"
            ),
            Self::NotPositive { index, value, transform } => {
                let (what, remedy) = match transform {
                    Transform::Log1p => ("log1p needs values above -1", "transform => 'none'"),
                    Transform::BoxCox(0.0) => (
                        "Box-Cox with power 0, which an estimated power may become, needs values above zero",
                        "a power above 0 such as transform => 0.5, or 'log1p'",
                    ),
                    Transform::BoxCox(_) => {
                        ("Box-Cox needs values that are not negative", "transform => 'none'")
                    }
                    _ => (
                        "the logarithm needs values above zero",
                        "transform => 'none', or 'log1p' where there are zeros",
                    ),
                };
                write!(f, "{what}, but grid point {index} (from 0) holds {value}; use {remedy}")
            }
            Self::DriverGap { driver, index } => write!(
                f,
                "driver '{driver}' has no finite value below 1e150 in size at grid point {index} (from 0) of the history; fill it in, drivers must be known wherever the series is"
            ),
            Self::NoDriverPlan { driver, step } => write!(
                f,
                "driver '{driver}' has no plan for step {step} of the horizon; append rows with NULL observed that carry it, or shorten the horizon"
            ),
            Self::CollinearDrivers { driver } => write!(
                f,
                "driver '{driver}' says nothing that level, slope, season and the other drivers do not already say; leave it out"
            ),
            Self::UndeterminedState { state } => write!(
                f,
                "the observations say nothing about the start of state {state}; give it a start in a1 and p1, or leave the state out"
            ),
            Self::ExactFit => write!(
                f,
                "the structure reproduces every value to rounding, so there is no variance to estimate and no honest interval; use a simpler structure or look at the source of the data"
            ),
            Self::Numerical { what } => write!(f, "{what}"),
            Self::DuplicateTime { at } => {
                write!(f, "two rows have the time {at}; aggregate them first")
            }
            Self::MissingTime { rows } => write!(f, "{rows} row(s) have a NULL time; filter them out"),
            Self::OffGrid { at, grid } => write!(
                f,
                "the time {at} is not on the grid ({grid}); mend it, or state the step with every => …"
            ),
            Self::NotAfter { at, last } => write!(
                f,
                "the time {at} is not after {last}, the last observation of the fit; hand in new rows only, or fit the series again where its past was corrected"
            ),
            Self::UnequalLists { name, got, times } => write!(
                f,
                "{name} has {got} item(s), but there are {times} times; they go together one by one"
            ),
            Self::DamagedFit { what } => write!(f, "the stored fit is damaged: {what}; fit the series again"),
            Self::NoGrid { why } => {
                write!(f, "no even grid fits the times: {why}; state the step with every => …")
            }
        }
    }
}

impl std::error::Error for Trouble {}

/// A request that no series could satisfy: rule, value and remedy, for the person who wrote the query.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct BadRequest {
    /// The argument that is wrong, as written in the query.
    pub argument: &'static str,
    /// What is wrong with it and what would be right.
    pub why: String,
}

impl BadRequest {
    pub(crate) fn new(argument: &'static str, why: impl Into<String>) -> Self {
        Self { argument, why: why.into() }
    }
}

impl fmt::Display for BadRequest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "argument '{}': {}", self.argument, self.why)
    }
}

impl std::error::Error for BadRequest {}

#[cfg(test)]
mod tests;
