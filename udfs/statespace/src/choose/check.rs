//! What a request contradicts before any series is seen: values out of range, seasons that share a harmonic, names that are taken or unknown.
//!
//! Each contradiction names the argument, the value and what would be right, and an unknown name the nearest known one.

use super::structure_of;
use crate::error::BadRequest;
use crate::request::{Request, SeasonRequest, TransformRequest};
use crate::structure::{Season, Trend, period_label};
use crate::transform::LARGEST_POWER;

/// Most harmonics per season.
const MOST_HARMONICS: usize = 60;

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
