//! Settling what a request left open: transform, season, harmonics, trend.
//!
//! `check` refuses what no series could satisfy, `season` tests a candidate period on the data; the rules are here.
//!
//! The rules are simple, cheap and stated, so that a reader can reproduce each choice by naming it:
//!
//! * **transform**: `log` when every value is above zero and the spread grows with the level: over blocks of a period
//!   (or eight points) the log of the standard deviation rises with the log of the mean by more than 1/2 (the
//!   spread-versus-level plot, Tukey 1977, *Exploratory Data Analysis*, ch. 5; slope b suggests the power 1 - b).
//! * **season**: a candidate period stays when at least three full periods are observed and, once the moving average over a
//!   period is taken off, the autocorrelation at that lag is above its one-sided 95 % bound under no season (Bartlett 1946,
//!   *JRSS Suppl.* 8), and every step of the period is observed at least twice. Of several candidates (7 and 365.25, 24 and 168) each is tested
//!   on what the average pattern of the ones before it leaves.
//! * **harmonics**: the dummy form for whole periods up to 13; longer or fractional ones as harmonics, a quarter of the period
//!   (rounded up) of them up to a period of 24, otherwise 3 (common practice: the first few carry a yearly pattern).
//! * **trend**: `damped` from 16 observed points on (the safe default of the trade, common practice), else `local level`.

mod check;
mod season;

pub use check::check;
use season::speaking;

use crate::error::Trouble;
use crate::request::{Request, SeasonRequest, TransformRequest};
use crate::structure::{Cycle, Season, Structure, Trend};
use crate::transform::Transform;

/// Longest whole period that is modelled by dummies when nothing is said.
const LONGEST_DUMMY: f64 = 13.0;
/// Observed points from which on the trend has a slope when nothing is said.
const SLOPE_FROM: usize = 16;

/// A structure with its scale.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Choice {
    pub(crate) structure: Structure,
    pub(crate) transform: Transform,
    /// The power of the transform is still to be estimated; what depends on the scale was settled on that of square roots.
    pub(crate) power_open: bool,
}

/// Settles the request for one series.
///
/// # Errors
/// When the series cannot carry what was asked for.
pub(crate) fn choose(request: &Request, observed: &[f64]) -> Result<Choice, Trouble> {
    let transform = match request.transform {
        TransformRequest::None => Transform::None,
        TransformRequest::Log => Transform::Log,
        TransformRequest::Log1p => Transform::Log1p,
        TransformRequest::BoxCox(power) => Transform::BoxCox(power.unwrap_or(0.5)),
        TransformRequest::Auto => {
            let period = match &request.season {
                SeasonRequest::Auto(p) | SeasonRequest::Given(p) => p.first().copied(),
            };
            if spread_follows_level(observed, period) { Transform::Log } else { Transform::None }
        }
    };
    let power_open = request.transform == TransformRequest::BoxCox(None);
    // An open power may come out as 0, the logarithm: the data must allow that.
    let strictest = if power_open { Transform::BoxCox(0.0) } else { transform };
    if let Some(index) = strictest.refuses(observed) {
        return Err(Trouble::NotPositive { index, value: observed[index], transform: strictest });
    }
    let scaled: Vec<f64> = observed.iter().map(|&v| transform.forward(v)).collect();
    let periods = match &request.season {
        SeasonRequest::Given(periods) => periods.clone(),
        SeasonRequest::Auto(candidates) => speaking(&scaled, candidates),
    };
    let count = observed.iter().filter(|v| !v.is_nan()).count();
    let trend = request.trend.unwrap_or(if count >= SLOPE_FROM { Trend::Damped } else { Trend::LocalLevel });
    Ok(Choice { structure: structure_of(request, trend, &periods), transform, power_open })
}

fn structure_of(request: &Request, trend: Trend, periods: &[f64]) -> Structure {
    let seasons = periods
        .iter()
        .enumerate()
        .map(|(i, &period)| Season {
            period,
            harmonics: match &request.harmonics {
                Some(counts) => {
                    let asked = counts.get(i).or_else(|| counts.first()).copied().unwrap_or(1);
                    Some(asked.min((period / 2.0).floor() as usize).max(1))
                }
                None => default_harmonics(period),
            },
            fixed: request.fixed_season,
        })
        .collect();
    Structure {
        trend,
        seasons,
        cycle: request.cycle.map(|(shortest, longest)| Cycle { shortest, longest }),
        autoregression: request.autoregression,
        drivers: request.drivers.len(),
        drifting_drivers: request.drifting_drivers.clone(),
    }
}

/// Harmonics of a season of which nothing was said; `None` = dummy form.
fn default_harmonics(period: f64) -> Option<usize> {
    if period.fract() == 0.0 && period <= LONGEST_DUMMY {
        None
    } else if period <= 24.0 {
        Some(((period / 4.0).ceil() as usize).max(1).min((period / 2.0).floor() as usize))
    } else {
        Some(3)
    }
}

/// Spread-versus-level slope above 1/2 over blocks.
fn spread_follows_level(observed: &[f64], period: Option<f64>) -> bool {
    if observed.iter().any(|v| *v <= 0.0) {
        return false;
    }
    let block = period.map_or(8, |p| p.round().clamp(4.0, 60.0) as usize);
    let mut points: Vec<(f64, f64)> = Vec::new();
    for chunk in observed.chunks(block) {
        let seen: Vec<f64> = chunk.iter().copied().filter(|v| !v.is_nan()).collect();
        if seen.len() * 2 < block || seen.len() < 3 {
            continue;
        }
        let mean = seen.iter().sum::<f64>() / seen.len() as f64;
        let variance = seen.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (seen.len() - 1) as f64;
        if variance > 0.0 {
            points.push((mean.ln(), 0.5 * variance.ln()));
        }
    }
    if points.len() < 3 {
        return false;
    }
    let n = points.len() as f64;
    let (mx, my) = points.iter().fold((0.0, 0.0), |(a, b), (x, y)| (a + x / n, b + y / n));
    let (sxx, sxy) =
        points.iter().fold((0.0, 0.0), |(a, b), (x, y)| (a + (x - mx).powi(2), b + (x - mx) * (y - my)));
    sxx > 0.0 && sxy / sxx > 0.5
}

#[cfg(test)]
mod tests;
