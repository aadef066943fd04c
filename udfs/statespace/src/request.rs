//! What the caller hands over: the series and what to make of it.

use crate::structure::Trend;

/// One series on an even grid.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Series {
    /// Observed values of the history, NaN = missing. Ends with the last observation.
    pub observed: Vec<f64>,
    /// Drivers with constant coefficients: one vector each, over the history and as much of the future as is planned.
    pub drivers: Vec<Vec<f64>>,
    /// Drivers with random-walk coefficients, likewise.
    pub drifting_drivers: Vec<Vec<f64>>,
}

/// Which seasons to model.
#[derive(Debug, Clone, PartialEq)]
pub enum SeasonRequest {
    /// Consider these periods (in steps), keep those the data speak for.
    Auto(Vec<f64>),
    /// These periods are in the model; empty = none.
    Given(Vec<f64>),
}

/// Which scale to model on.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TransformRequest {
    /// Decide by the rule on `crate::choose`.
    Auto,
    /// The data as they are.
    None,
    /// The natural logarithm.
    Log,
    /// The natural logarithm of one plus the value.
    Log1p,
    /// Box-Cox with this power; absent = estimated between 0 and 1.
    BoxCox(Option<f64>),
}

/// The whole request. `None` or `Auto` leave a matter to the program.
#[derive(Debug, Clone, PartialEq)]
pub struct Request {
    /// Form of the trend.
    pub trend: Option<Trend>,
    /// Seasons.
    pub season: SeasonRequest,
    /// Harmonics: one count per season, or one for all; absent = the stated rule.
    pub harmonics: Option<Vec<usize>>,
    /// True = the seasonal pattern does not drift.
    pub fixed_season: bool,
    /// Shortest and longest period (in steps) of a stochastic cycle; absent = no cycle.
    pub cycle: Option<(f64, f64)>,
    /// Order of a stationary autoregression beside the irregular; 0 = none.
    pub autoregression: usize,
    /// Scale.
    pub transform: TransformRequest,
    /// Parameters that are given: name and value.
    pub known: Vec<(String, f64)>,
    /// Names of [`Series::drivers`].
    pub drivers: Vec<String>,
    /// Names of [`Series::drifting_drivers`].
    pub drifting_drivers: Vec<String>,
}

impl Default for Request {
    fn default() -> Self {
        Self {
            trend: None,
            season: SeasonRequest::Auto(Vec::new()),
            harmonics: None,
            fixed_season: false,
            cycle: None,
            autoregression: 0,
            transform: TransformRequest::Auto,
            known: Vec::new(),
            drivers: Vec::new(),
            drifting_drivers: Vec::new(),
        }
    }
}
