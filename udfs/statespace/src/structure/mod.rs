//! The structures: what a user can ask for, and the component files that turn it into a model.
//!
//! Each component is one file that says its matrices, its parameters, its start and its source:
//! `trend`, `season_dummy`, `season_harmonic`, `driver`, `cycle`, `autoregression`, `irregular`.
//! They fill an `Assembly` one after another; the result is a [`Model`].

pub(crate) mod assembly;
mod autoregression;
mod cycle;
mod driver;
mod irregular;
mod model;
mod season_dummy;
mod season_harmonic;
mod trend;

pub(crate) use autoregression::MAX_ORDER;
pub(crate) use model::Effect;
pub use model::{Link, Model, ParameterSpec, Role};

/// Largest damping that estimation considers. A damped slope or cycle comes as near to an undamped one as it likes without being one;
/// without an end of the range a straight series would make its estimate creep for ever.
pub(crate) const MOST_DAMPING: f64 = 0.9999;

/// Form of the trend (H 2.3, 6.1; DK 3.2).
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Trend {
    /// No level and no slope.
    None,
    /// A constant.
    FixedLevel,
    /// A random walk.
    LocalLevel,
    /// A straight line.
    FixedLine,
    /// Level and slope are random walks.
    LocalLinear,
    /// Integrated random walk: only the slope is disturbed.
    Smooth,
    /// Local linear whose slope is a stationary AR(1).
    Damped,
}

impl Trend {
    /// All forms with the words of the `trend` argument.
    pub const ALL: [(&'static str, Self); 7] = [
        ("local level", Self::LocalLevel),
        ("local linear", Self::LocalLinear),
        ("smooth", Self::Smooth),
        ("damped", Self::Damped),
        ("fixed level", Self::FixedLevel),
        ("fixed line", Self::FixedLine),
        ("none", Self::None),
    ];

    /// The word of this form.
    pub fn name(self) -> &'static str {
        Self::ALL.iter().find(|(_, t)| *t == self).map_or("none", |(name, _)| name)
    }

    /// True when there is a level.
    pub fn has_level(self) -> bool {
        self != Self::None
    }

    /// True when there is a slope.
    pub fn has_slope(self) -> bool {
        matches!(self, Self::FixedLine | Self::LocalLinear | Self::Smooth | Self::Damped)
    }
}

/// One seasonal pattern.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Season {
    /// Period in steps; whole for the dummy form, any number above 2 with harmonics.
    pub period: f64,
    /// Number of harmonics; absent = dummy form.
    pub harmonics: Option<usize>,
    /// True = the pattern does not drift (its variance is zero and not a parameter).
    pub fixed: bool,
}

/// A stochastic cycle (H 2.3.3): bounds of the period to be estimated, in steps.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cycle {
    /// Shortest period, above 2.
    pub shortest: f64,
    /// Longest period.
    pub longest: f64,
}

/// A settled structure: nothing is left to choose.
#[derive(Debug, Clone, PartialEq)]
pub struct Structure {
    /// Form of the trend.
    pub trend: Trend,
    /// Seasons; empty = none.
    pub seasons: Vec<Season>,
    /// Stochastic cycle, if any.
    pub cycle: Option<Cycle>,
    /// Order of the autoregression; 0 = none.
    pub autoregression: usize,
    /// Number of drivers with constant coefficients.
    pub drivers: usize,
    /// Names of drivers with random-walk coefficients.
    pub drifting_drivers: Vec<String>,
}

impl Default for Structure {
    fn default() -> Self {
        Self {
            trend: Trend::LocalLevel,
            seasons: Vec::new(),
            cycle: None,
            autoregression: 0,
            drivers: 0,
            drifting_drivers: Vec::new(),
        }
    }
}

impl Structure {
    /// The model of this structure: states, parameters, and how parameters enter the system.
    pub fn model(&self) -> Model {
        let mut assembly = assembly::Assembly::default();
        irregular::add(&mut assembly);
        trend::add(&mut assembly, self.trend);
        let several = self.seasons.len() > 1;
        for season in &self.seasons {
            let name =
                if several { format!("season_{}", period_label(season.period)) } else { "season".to_owned() };
            match season.harmonics {
                None => season_dummy::add(&mut assembly, season, &name),
                Some(count) => season_harmonic::add(&mut assembly, season, count, &name),
            }
        }
        if let Some(bounds) = self.cycle {
            cycle::add(&mut assembly, bounds);
        }
        if self.autoregression > 0 {
            autoregression::add(&mut assembly, self.autoregression);
        }
        driver::add(&mut assembly, &self.drifting_drivers);
        Model::new(assembly, self.drivers)
    }

    /// Diffuse elements of this structure, the data's share that only fixes where it starts.
    pub fn diffuse_elements(&self) -> usize {
        self.model().diffuse_elements()
    }
}

/// A period as it stands in names and texts: '52.18', '12'.
pub fn period_label(period: f64) -> String {
    let rounded = (period * 1000.0).round() / 1000.0;
    format!("{rounded}")
}
