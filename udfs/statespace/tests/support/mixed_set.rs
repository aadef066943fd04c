//! The mixed set on which estimation is judged: series and the structures they are fitted in.

use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Poisson, StandardNormal};
use stillwell_statespace::structure::{Link, Season, Structure, Trend};
use stillwell_statespace::{Likelihood, Request, SeasonRequest, Series, TransformRequest, Workspace, fit};

/// Series of one kind.
pub(crate) struct Group {
    pub(crate) name: &'static str,
    pub(crate) series: Vec<Vec<f64>>,
    pub(crate) structures: Vec<(&'static str, Structure)>,
}

fn structure(trend: Trend, season: Option<(f64, Option<usize>)>) -> Structure {
    let seasons = season.map(|(period, harmonics)| Season { period, harmonics, fixed: false });
    Structure { trend, seasons: seasons.into_iter().collect(), ..Structure::default() }
}

fn plain() -> Vec<(&'static str, Structure)> {
    vec![
        ("local level", structure(Trend::LocalLevel, None)),
        ("local linear", structure(Trend::LocalLinear, None)),
        ("damped", structure(Trend::Damped, None)),
    ]
}

fn monthly() -> Vec<(&'static str, Structure)> {
    let mut all = plain();
    all.push(("local linear + dummy 12", structure(Trend::LocalLinear, Some((12.0, None)))));
    all.push(("local linear + 3 harmonics of 12", structure(Trend::LocalLinear, Some((12.0, Some(3))))));
    all.push(("damped + dummy 12", structure(Trend::Damped, Some((12.0, None)))));
    all
}

fn weekly() -> Vec<(&'static str, Structure)> {
    vec![
        ("local level + 3 harmonics of 52", structure(Trend::LocalLevel, Some((52.0, Some(3))))),
        ("local linear + 3 harmonics of 52", structure(Trend::LocalLinear, Some((52.0, Some(3))))),
        ("damped + 3 harmonics of 52", structure(Trend::Damped, Some((52.0, Some(3))))),
    ]
}

/// Level, slope and a pattern that wander by variances drawn over many powers of ten, some of them zero.
fn wandering(draws: &mut ChaCha8Rng, points: usize, period: usize) -> Vec<f64> {
    let size = |draws: &mut ChaCha8Rng, low: f64, high: f64| {
        if draws.random_bool(0.3) { 0.0 } else { 10.0_f64.powf(draws.random_range(low..high)) }
    };
    let (level_sd, slope_sd, season_sd) =
        (size(draws, -1.5, 0.5), size(draws, -2.5, -0.5), size(draws, -2.0, -0.3));
    let normal = |draws: &mut ChaCha8Rng| -> f64 { StandardNormal.sample(draws) };
    let mut pattern: Vec<f64> = (0..period)
        .map(|t| 4.0 * (std::f64::consts::TAU * t as f64 / period as f64 + 1.0).sin() + normal(draws))
        .collect();
    let (mut level, mut slope) = (100.0, 0.2 * normal(draws));
    (0..points)
        .map(|t| {
            pattern[t % period] += season_sd * normal(draws);
            level += slope + level_sd * normal(draws);
            slope += slope_sd * normal(draws);
            level + pattern[t % period] + normal(draws)
        })
        .collect()
}

/// Small counts, most of them zero, that come in runs.
fn counts(draws: &mut ChaCha8Rng, points: usize) -> Vec<f64> {
    let share = draws.random_range(0.1..0.5);
    let mean: f64 = draws.random_range(1.0..6.0);
    let size = Poisson::new(mean).expect("a mean above zero");
    let drift = draws.random_range(-0.004..0.004);
    (0..points)
        .map(|t| {
            let sold = draws.random_bool((share + drift * t as f64).clamp(0.03, 0.97));
            if sold { 1.0 + size.sample(draws) } else { 0.0 }
        })
        .collect()
}

/// The set: `monthly` are series from outside, if there are any; `size` of each simulated kind.
pub(crate) fn mixed(outside: &[Vec<f64>], size: usize) -> Vec<Group> {
    let mut draws = ChaCha8Rng::seed_from_u64(20_260_101);
    let mut groups = Vec::new();
    if !outside.is_empty() {
        let logs =
            outside.iter().filter(|y| y.iter().all(|v| *v > 0.0)).map(|y| y.iter().map(|v| v.ln()).collect());
        groups.push(Group { name: "monthly from outside", series: outside.to_vec(), structures: monthly() });
        groups.push(Group {
            name: "the same in logarithms",
            series: logs.collect(),
            structures: monthly().split_off(3),
        });
    }
    let months = (0..size).map(|_| {
        let points = draws.random_range(48..145);
        let mut y = wandering(&mut draws, points, 12);
        // Every fourth has gaps.
        if draws.random_bool(0.25) {
            (0..points / 12).for_each(|_| y[draws.random_range(1..points - 1)] = f64::NAN);
        }
        y
    });
    groups.push(Group { name: "simulated monthly", series: months.collect(), structures: monthly() });
    let weeks = (0..size).map(|_| wandering(&mut draws, 156, 52)).collect();
    groups.push(Group { name: "simulated weekly", series: weeks, structures: weekly() });
    let sparse = (0..size).map(|i| counts(&mut draws, if i % 2 == 0 { 60 } else { 156 })).collect();
    let mut structures = plain();
    structures.extend(weekly().into_iter().take(1));
    groups.push(Group { name: "intermittent", series: sparse, structures });
    groups
}

/// What came of one fit.
pub(crate) struct Judged {
    /// How far its likelihood lies below the best one.
    pub(crate) below: f64,
    pub(crate) converged: bool,
    pub(crate) evaluations: usize,
    /// Estimates, on the scale of the series brought to unit size.
    pub(crate) values: Vec<f64>,
}

/// Fits one series and compares the likelihood at the estimates with the `best` one; `None` where there is no fit.
pub(crate) fn judge(
    structure: &Structure,
    observed: &[f64],
    workspace: &mut Workspace,
    best: &mut dyn FnMut(&Series) -> f64,
) -> Option<Judged> {
    let request = Request {
        trend: Some(structure.trend),
        season: SeasonRequest::Given(structure.seasons.iter().map(|s| s.period).collect()),
        harmonics: structure.seasons.first().and_then(|s| s.harmonics).map(|h| vec![h]),
        transform: TransformRequest::None,
        ..Request::default()
    };
    let fit = fit(&Series { observed: observed.to_vec(), ..Series::default() }, &request, workspace).ok()?;
    // Brought to unit size: the slow search knows nothing of scales.
    let seen = || observed.iter().filter(|v| !v.is_nan());
    let count = seen().count() as f64;
    let mean = seen().sum::<f64>() / count;
    let size = (seen().map(|v| (v - mean).powi(2)).sum::<f64>() / count).sqrt();
    let scaled =
        Series { observed: observed.iter().map(|v| (v - mean) / size).collect(), ..Series::default() };
    let model = structure.model();
    let values: Vec<f64> = model
        .parameters()
        .iter()
        .zip(fit.parameters())
        .map(|(spec, found)| match spec.link {
            Link::Variance => found.value / (size * size),
            // A damping of nothing means nothing: any will do.
            _ if found.value.is_nan() => 0.5,
            _ => found.value,
        })
        .collect();
    let ours = Likelihood::new(model, scaled.clone()).at(&values).expect("a likelihood");
    Some(Judged {
        below: best(&scaled) - ours,
        converged: fit.converged(),
        evaluations: fit.evaluations(),
        values,
    })
}
