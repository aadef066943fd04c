//! The scale on which estimation works: centred, and divided by powers of two so that no bit is lost.
//!
//! Scaling the data scales all variances; scaling a drifting driver scales its coefficient. Both change the log-likelihood
//! by a constant that is put back.

use crate::request::Series;
use crate::structure::{Model, Role};

/// How a series was brought to the working scale.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Scaling {
    /// Subtracted from the observations.
    pub(crate) shift: f64,
    /// The observations were divided by this power of two.
    pub(crate) unit: f64,
    /// Each drifting driver was divided by this power of two.
    pub(crate) drivers: Vec<f64>,
}

impl Scaling {
    /// Finds the scaling of a series on the model scale. `centre`: the model has a level to take up a shift.
    pub(crate) fn of(series: &Series, centre: bool) -> Self {
        let seen = || series.observed.iter().copied().filter(|v| !v.is_nan());
        let count = seen().count() as f64;
        let mean = seen().sum::<f64>() / count;
        let shift = if centre { mean } else { 0.0 };
        let square = seen().map(|v| (v - shift).powi(2)).sum::<f64>() / count;
        let drivers = series
            .drifting_drivers
            .iter()
            .map(|x| {
                let n = series.observed.len().min(x.len());
                let square = x[..n].iter().map(|v| v * v).sum::<f64>() / n as f64;
                power_of_two(square.sqrt())
            })
            .collect();
        Self { shift, unit: power_of_two(square.sqrt()), drivers }
    }

    /// The series on the working scale.
    pub(crate) fn apply(&self, series: &Series) -> Series {
        let scaled = |x: &[f64], unit: f64| x.iter().map(|v| v / unit).collect::<Vec<f64>>();
        Series {
            observed: series.observed.iter().map(|v| (v - self.shift) / self.unit).collect(),
            drivers: series.drivers.clone(),
            drifting_drivers: series
                .drifting_drivers
                .iter()
                .zip(&self.drivers)
                .map(|(x, unit)| scaled(x, *unit))
                .collect(),
        }
    }

    /// Factor from a working-scale parameter to the model scale, by parameter of the model.
    pub(crate) fn factors(&self, model: &Model) -> Vec<f64> {
        model
            .parameters()
            .iter()
            .map(|spec| match (spec.link, spec.role) {
                (crate::structure::Link::Variance, Role::Driver(i)) => (self.unit / self.drivers[i]).powi(2),
                (crate::structure::Link::Variance, _) => self.unit * self.unit,
                _ => 1.0,
            })
            .collect()
    }

    /// What to add to a working-scale log-likelihood with `degrees` = n - d.
    pub(crate) fn log_likelihood(&self, degrees: f64) -> f64 {
        -degrees * self.unit.ln() - self.drivers.iter().map(|k| k.ln()).sum::<f64>()
    }
}

/// The power of two nearest to `size` in the logarithm; 1 for zero or what is not finite.
pub(crate) fn power_of_two(size: f64) -> f64 {
    if size > 0.0 && size.is_finite() { size.log2().round().exp2() } else { 1.0 }
}
