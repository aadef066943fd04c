//! Settling what a request left open: transform, season, harmonics, trend.
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

use crate::error::{BadRequest, Trouble};
use crate::quantile::normal_quantile;
use crate::request::{Request, SeasonRequest, TransformRequest};
use crate::structure::{Cycle, Season, Structure, Trend, period_label};
use crate::transform::{LARGEST_POWER, Transform};

/// Longest whole period that is modelled by dummies when nothing is said.
const LONGEST_DUMMY: f64 = 13.0;
/// Most harmonics per season.
const MOST_HARMONICS: usize = 60;
/// Observed points from which on the trend has a slope when nothing is said.
const SLOPE_FROM: usize = 16;

/// Names that parameters of a structure have; a drifting driver names a parameter too.
const PARAMETERS: [&str; 9] = [
    "irregular",
    "level",
    "slope",
    "season",
    "slope_damping",
    "cycle",
    "cycle_damping",
    "cycle_period",
    "autoregression",
];

/// Contradictions that no series could satisfy.
///
/// # Errors
/// Names the argument, what is wrong and what would be right.
pub fn check(request: &Request) -> Result<(), BadRequest> {
    if let TransformRequest::BoxCox(Some(power)) = request.transform
        && !(0.0..=LARGEST_POWER).contains(&power)
    {
        return Err(BadRequest::new(
            "transform",
            format!("a Box-Cox power lies between 0 (the logarithm) and {LARGEST_POWER}, got {power}"),
        ));
    }
    let periods = match &request.season {
        SeasonRequest::Auto(periods) | SeasonRequest::Given(periods) => periods,
    };
    let argument = if matches!(request.season, SeasonRequest::Auto(_)) { "period" } else { "season" };
    for &period in periods {
        if !(period.is_finite() && period >= 2.0) {
            return Err(BadRequest::new(
                argument,
                format!("a period is at least 2 steps, got {}; 0 means no season", period_label(period)),
            ));
        }
        if period > 100_000.0 {
            return Err(BadRequest::new(argument, format!("a period is at most 100000 steps, got {period}")));
        }
    }
    for (i, a) in periods.iter().enumerate() {
        if periods[..i].contains(a) {
            return Err(BadRequest::new(
                argument,
                format!("the period {} is listed twice", period_label(*a)),
            ));
        }
    }
    if let Some(harmonics) = &request.harmonics {
        if explicit(request) && harmonics.len() > 1 && harmonics.len() != periods.len() {
            return Err(BadRequest::new(
                "harmonics",
                format!(
                    "{} counts for {} periods; give one count, or one per period",
                    harmonics.len(),
                    periods.len()
                ),
            ));
        }
        for (i, &count) in harmonics.iter().enumerate() {
            if count == 0 || count > MOST_HARMONICS {
                return Err(BadRequest::new(
                    "harmonics",
                    format!(
                        "a count lies between 1 and {MOST_HARMONICS}, got {count}; leave it out for the default"
                    ),
                ));
            }
            let against =
                if harmonics.len() == 1 { periods.as_slice() } else { periods.get(i..=i).unwrap_or(&[]) };
            for &period in against {
                if 2.0 * count as f64 > period {
                    return Err(BadRequest::new(
                        "harmonics",
                        format!(
                            "a period of {} steps has at most {} harmonics, got {count}",
                            period_label(period),
                            (period / 2.0).floor()
                        ),
                    ));
                }
            }
        }
    }
    check_overlap(request, periods)?;
    if let Some((shortest, longest)) = request.cycle
        && !(shortest >= 2.0 && longest > shortest && longest.is_finite())
    {
        return Err(BadRequest::new(
            "cycle",
            format!("the shortest period is at least 2 and below the longest, got ({shortest}, {longest})"),
        ));
    }
    if request.autoregression > crate::structure::MAX_ORDER {
        return Err(BadRequest::new(
            "autoregression",
            format!("the order is at most {}, got {}", crate::structure::MAX_ORDER, request.autoregression),
        ));
    }
    check_names(request)?;
    if request.trend == Some(Trend::None)
        && matches!(&request.season, SeasonRequest::Given(p) if p.is_empty())
        && request.cycle.is_none()
        && request.autoregression == 0
        && request.drivers.is_empty()
        && request.drifting_drivers.is_empty()
    {
        return Err(BadRequest::new(
            "trend",
            "'none' without season, cycle, autoregression or drivers leaves nothing to model; choose a trend",
        ));
    }
    check_known(request)
}

fn explicit(request: &Request) -> bool {
    matches!(request.season, SeasonRequest::Given(_))
}

/// Two seasons must not share a frequency: nothing could tell whose pattern it is.
fn check_overlap(request: &Request, periods: &[f64]) -> Result<(), BadRequest> {
    if !explicit(request) {
        return Ok(());
    }
    let structure = structure_of(request, Trend::None, periods);
    let frequencies = |season: &Season| -> Vec<f64> {
        let count = season.harmonics.unwrap_or_else(|| (season.period / 2.0).floor() as usize);
        (1..=count).map(|j| j as f64 / season.period).collect()
    };
    for (i, a) in structure.seasons.iter().enumerate() {
        for b in &structure.seasons[..i] {
            let others = frequencies(b);
            if frequencies(a).iter().any(|x| others.iter().any(|y| (x - y).abs() < 1e-9)) {
                return Err(BadRequest::new(
                    "season",
                    format!(
                        "the seasons {} and {} share a harmonic, so the data cannot tell them apart; give the longer one fewer harmonics, or leave one out",
                        period_label(b.period),
                        period_label(a.period)
                    ),
                ));
            }
        }
    }
    Ok(())
}

fn check_names(request: &Request) -> Result<(), BadRequest> {
    let all: Vec<&String> = request.drivers.iter().chain(&request.drifting_drivers).collect();
    for (i, name) in all.iter().enumerate() {
        if all[..i].contains(name) {
            return Err(BadRequest::new("drivers", format!("'{name}' is listed twice")));
        }
    }
    let reserved =
        |name: &str| PARAMETERS.contains(&name) || name.starts_with("season_") || name.starts_with("ar_");
    if let Some(name) = request.drifting_drivers.iter().find(|name| reserved(name)) {
        return Err(BadRequest::new(
            "drifting_drivers",
            format!(
                "'{name}' is the name of a parameter of the model, and known => could not tell them apart; rename it"
            ),
        ));
    }
    Ok(())
}

/// The names that `known` may hold: exact when the structure is given in full, otherwise those of any outcome.
fn known_names(request: &Request) -> Vec<String> {
    let trends = request.trend.map_or_else(|| vec![Trend::Damped], |t| vec![t]);
    let periods = match &request.season {
        SeasonRequest::Auto(periods) if periods.is_empty() => vec![12.0],
        SeasonRequest::Auto(periods) | SeasonRequest::Given(periods) => periods.clone(),
    };
    let mut names: Vec<String> = Vec::new();
    for trend in trends {
        let structure = structure_of(request, trend, &periods);
        for parameter in structure.model().parameters() {
            names.push(parameter.name.clone());
        }
    }
    names
}

fn check_known(request: &Request) -> Result<(), BadRequest> {
    let names = known_names(request);
    for (i, (name, value)) in request.known.iter().enumerate() {
        if request.known[..i].iter().any(|(n, _)| n == name) {
            return Err(BadRequest::new("known", format!("'{name}' is given twice")));
        }
        if !names.contains(name) {
            return Err(BadRequest::new(
                "known",
                format!(
                    "'{name}' is no parameter of this structure; it has {}{}",
                    names.join(", "),
                    nearest(name, &names)
                ),
            ));
        }
        let (valid, rule) = match name.as_str() {
            "slope_damping" | "cycle_damping" => {
                (*value > 0.0 && *value < 1.0, "lies between 0 and 1, both excluded")
            }
            "cycle_period" => (*value >= 2.0, "is at least 2 steps"),
            ar if ar.starts_with("ar_") => (value.is_finite(), "is a finite number"),
            _ => (*value >= 0.0 && value.is_finite(), "is a variance: a finite number, not negative"),
        };
        if !valid {
            return Err(BadRequest::new("known", format!("'{name}' {rule}; got {value}")));
        }
    }
    Ok(())
}

/// "; did you mean 'x'?" where a valid name is near.
fn nearest(name: &str, names: &[String]) -> String {
    names
        .iter()
        .map(|n| (strsim::damerau_levenshtein(name, n), n))
        .min()
        .filter(|(distance, n)| *distance <= 1 + n.len() / 4)
        .map_or_else(String::new, |(_, n)| format!("; did you mean '{n}'?"))
}

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

/// The candidates that the data speak for, each tested on what the ones before it leave: a weekly pattern in hourly data must show beside the
/// daily one, which comes round after a week too.
fn speaking(values: &[f64], candidates: &[f64]) -> Vec<f64> {
    let mut rest = values.to_vec();
    let mut kept = Vec::new();
    for &period in candidates {
        if season_speaks(&rest, period) {
            kept.push(period);
            rest = without_pattern(&rest, period.round() as usize);
        }
    }
    kept
}

/// The series less its average pattern over a period: for each step of the period the mean of what the moving average leaves
/// (classical decomposition, common practice).
fn without_pattern(values: &[f64], period: usize) -> Vec<f64> {
    let rest = without_moving_average(values, period);
    let (mut sums, mut counts) = (vec![0.0; period], vec![0.0; period]);
    for (t, v) in rest.iter().enumerate().filter(|(_, v)| !v.is_nan()) {
        sums[t % period] += v;
        counts[t % period] += 1.0;
    }
    values
        .iter()
        .enumerate()
        .map(|(t, v)| if counts[t % period] > 0.0 { v - sums[t % period] / counts[t % period] } else { *v })
        .collect()
}

/// What is left of the series after its moving average over a period is autocorrelated at the period.
///
/// Under no season the autocorrelation at lag s has about the variance `(1 + 2 sum r_k^2) / pairs` (Bartlett 1946); the sum runs
/// over lags up to a quarter of the period, which hold what a wandering level leaves behind.
fn season_speaks(values: &[f64], period: f64) -> bool {
    let lag = period.round() as usize;
    let seen = values.iter().filter(|v| !v.is_nan()).count() as f64;
    if lag < 2 || seen < 3.0 * period || values.len() < 3 * lag || !every_step_is_seen(values, lag) {
        return false;
    }
    let rest = without_moving_average(values, lag);
    let variance = mean_product(&rest, 0).0;
    if !(variance > 0.0) {
        return false;
    }
    let (at_period, pairs) = mean_product(&rest, lag);
    let short: f64 = (1..=(lag / 4).max(1)).map(|k| (mean_product(&rest, k).0 / variance).powi(2)).sum();
    let bound = normal_quantile(0.95) * ((1.0 + 2.0 * short) / pairs.max(1.0)).sqrt();
    pairs >= 3.0 && at_period / variance > bound
}

/// Each step of the period is observed at least twice. Working days have no weekly pattern that the data could show: two
/// of its seven steps are never there.
fn every_step_is_seen(values: &[f64], period: usize) -> bool {
    (0..period).all(|phase| values.iter().skip(phase).step_by(period).filter(|v| !v.is_nan()).count() >= 2)
}

/// The series less its centred moving average over `period` points (half weights at the ends of an even one: classical
/// decomposition, common practice); NaN near the ends and where under half of the window is observed.
fn without_moving_average(values: &[f64], period: usize) -> Vec<f64> {
    let half = period / 2;
    let edge = if period.is_multiple_of(2) { 0.5 } else { 1.0 };
    (0..values.len())
        .map(|t| {
            if t < half || t + half >= values.len() {
                return f64::NAN;
            }
            let (mut sum, mut weight) = (0.0, 0.0);
            for (i, v) in values[t - half..=t + half].iter().enumerate() {
                if !v.is_nan() {
                    let w = if i == 0 || i == 2 * half { edge } else { 1.0 };
                    sum += w * v;
                    weight += w;
                }
            }
            if weight * 2.0 < period as f64 { f64::NAN } else { values[t] - sum / weight }
        })
        .collect()
}

/// Mean product of the pairs `lag` apart that are both there, and their number.
fn mean_product(values: &[f64], lag: usize) -> (f64, f64) {
    let (mut sum, mut count) = (0.0, 0.0);
    for (a, b) in values.iter().zip(&values[lag.min(values.len())..]) {
        let product = a * b;
        if !product.is_nan() {
            sum += product;
            count += 1.0;
        }
    }
    if count > 0.0 { (sum / count, count) } else { (0.0, 0.0) }
}

#[cfg(test)]
mod tests;
