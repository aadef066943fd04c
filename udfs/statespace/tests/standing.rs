//! A standing that is advanced over new points equals the filter over the whole series at the same parameters, and its forecasts those of the
//! fit that it was taken from: 1e-9 relative to the size of the series.

#[path = "support/plain.rs"]
mod plain;
#[path = "support/simulate.rs"]
mod simulate;

use plain::plain;
use simulate::simulate;
use stillwell_statespace::structure::{Structure, Trend};
use stillwell_statespace::{
    Fit, Forecast, Request, SeasonRequest, Series, Standing, TransformRequest, Trouble, Workspace, fit,
};

/// History, new points, plan.
const OLD: usize = 80;
const NEW: usize = 9;
const AHEAD: usize = 6;
const TOLERANCE: f64 = 1e-9;

fn requests() -> Vec<Request> {
    let seasonal = |trend, periods: &[f64], harmonics: Option<Vec<usize>>| Request {
        season: SeasonRequest::Given(periods.to_vec()),
        harmonics,
        ..plain(trend)
    };
    vec![
        plain(Trend::LocalLevel),
        plain(Trend::LocalLinear),
        plain(Trend::Smooth),
        plain(Trend::Damped),
        plain(Trend::FixedLevel),
        plain(Trend::FixedLine),
        seasonal(Trend::LocalLevel, &[4.0], None),
        Request { fixed_season: true, ..seasonal(Trend::LocalLevel, &[4.0], None) },
        seasonal(Trend::LocalLevel, &[6.0], Some(vec![3])),
        seasonal(Trend::Smooth, &[12.4], Some(vec![2])),
        seasonal(Trend::LocalLevel, &[4.0, 13.0], Some(vec![1, 2])),
        Request { cycle: Some((5.0, 20.0)), ..plain(Trend::LocalLevel) },
        Request { autoregression: 2, ..plain(Trend::FixedLevel) },
        Request { transform: TransformRequest::Log, ..seasonal(Trend::LocalLinear, &[4.0], None) },
        Request { transform: TransformRequest::Log1p, ..plain(Trend::LocalLevel) },
        Request { transform: TransformRequest::BoxCox(Some(0.4)), ..plain(Trend::Damped) },
        Request {
            drivers: vec!["price".to_owned(), "promotion".to_owned()],
            drifting_drivers: vec!["heat".to_owned()],
            ..seasonal(Trend::LocalLevel, &[4.0], None)
        },
        Request { drivers: vec!["price".to_owned()], ..plain(Trend::None) },
    ]
}

fn wave(phase: f64) -> Vec<f64> {
    (0..OLD + NEW + AHEAD).map(|t| 2.0 + (t as f64 * (0.9 + 0.23 * phase) + phase).sin()).collect()
}

/// A series with gaps that every request can be fitted to; drivers reach into the plan.
fn series(request: &Request) -> Series {
    let structure = Structure { trend: Trend::LocalLinear, ..Structure::default() };
    let mut series = simulate(&structure, &[1.0, 0.5, 0.001], OLD + NEW, 0.5, Vec::new(), 3);
    for (t, y) in series.observed.iter_mut().enumerate() {
        *y += 60.0 + [3.0, -1.0, -4.0, 2.0][t % 4] + 2.0 * wave(0.0)[t];
    }
    for gap in [10, 11, OLD - 3, OLD, OLD + 4] {
        series.observed[gap] = f64::NAN;
    }
    series.drivers = (0..request.drivers.len()).map(|i| wave(i as f64)).collect();
    series.drifting_drivers = (0..request.drifting_drivers.len()).map(|_| wave(2.5)).collect();
    series
}

fn history(series: &Series) -> Series {
    Series { observed: series.observed[..OLD].to_vec(), ..series.clone() }
}

fn fitted(series: &Series, request: &Request) -> Fit {
    fit(series, request, &mut Workspace::new()).expect("a fit")
}

/// The same structure with every parameter of `standing` given.
fn at_parameters(request: &Request, standing: &Standing) -> Request {
    let known = standing.parameters.iter().filter(|p| !p.value.is_nan());
    Request { known: known.map(|p| (p.name.clone(), p.value)).collect(), ..request.clone() }
}

fn tail(series: &Series, from: usize) -> Vec<Vec<f64>> {
    series.drivers.iter().chain(&series.drifting_drivers).map(|x| x[from..].to_vec()).collect()
}

/// The state with the level as it is.
fn unshifted(standing: &Standing) -> Vec<f64> {
    let mut state = standing.state.clone();
    state[0] += standing.shift;
    state
}

#[track_caller]
fn close(what: &str, ours: &[f64], other: &[f64]) {
    assert_eq!(ours.len(), other.len(), "{what}");
    for (i, (a, b)) in ours.iter().zip(other).enumerate() {
        assert!((a - b).abs() <= TOLERANCE * (1.0 + b.abs()), "{what} {i}: {a} {b}");
    }
}

#[track_caller]
fn same_forecast(what: &str, ours: &Forecast, other: &Forecast) {
    close(what, &ours.expected, &other.expected);
    close(what, &ours.std_error, &other.std_error);
    close(what, &ours.lower, &other.lower);
    close(what, &ours.upper, &other.upper);
    close(what, &ours.total_expected, &other.total_expected);
    close(what, &ours.total_lower, &other.total_lower);
    close(what, &ours.total_upper, &other.total_upper);
}

#[test]
fn a_standing_forecasts_what_its_fit_does() {
    for request in requests() {
        let series = history(&series(&request));
        let fit = fitted(&series, &request);
        let standing = fit.standing();
        assert_eq!(standing.contradiction(), None, "{request:?}");
        let ours = standing.forecast(AHEAD, 0.8, None).expect("a forecast");
        same_forecast(&format!("{request:?}"), &ours, &fit.forecast(AHEAD, 0.8).expect("a forecast"));
        // The last point's filtered components are its smoothed ones.
        let (last, smoothed) = (standing.last_point(), fit.components(0.9).expect("components"));
        for (part, state) in [
            (last.level, smoothed.level),
            (last.slope, smoothed.slope),
            (last.seasonal, smoothed.seasonal),
            (last.cycle, smoothed.cycle),
            (last.autoregression, smoothed.autoregression),
        ] {
            let state = state.map(|s| (s.value[OLD - 1], s.std_error[OLD - 1]));
            assert_eq!(part.is_some(), state.is_some(), "{request:?}");
            if let (Some((value, error)), Some((v, e))) = (part, state) {
                // A fixed level beside an autoregression that comes near a random walk is told to thousands of units only: its last
                // digits are a share of that error, not of the value.
                let size = 1.0 + e;
                close(&format!("{request:?}"), &[value / size, error], &[v / size, e]);
            }
        }
        let coefficients: Vec<(f64, f64)> =
            smoothed.coefficients.iter().map(|c| (c.value[OLD - 1], c.std_error[OLD - 1])).collect();
        for ((a, b), (c, d)) in standing.coefficients().into_iter().zip(coefficients) {
            close(&format!("{request:?}"), &[a, b], &[c, d]);
        }
    }
}

#[test]
fn advancing_equals_filtering_the_whole_series_at_the_same_parameters() {
    for request in requests() {
        let series = series(&request);
        let before = fitted(&history(&series), &request).standing();
        let whole = fitted(&series, &at_parameters(&request, &before)).standing();
        let at_once = before.advance(&series.observed[OLD..], &tail(&series, OLD)).expect("advanced");
        // One point a night; the plan moves along.
        let mut nightly = before.clone();
        for t in OLD..OLD + NEW {
            if series.observed[t].is_nan() {
                continue;
            }
            let from = nightly.points;
            nightly = nightly.advance(&series.observed[from..=t], &tail(&series, from)).expect("advanced");
        }
        for (what, ours) in [("at once", &at_once), ("nightly", &nightly)] {
            let what = format!("{what}: {request:?}");
            close(&what, &unshifted(ours), &unshifted(&whole));
            let size = ours.covariance.iter().fold(0.0_f64, |a, v| a.max(v.abs()));
            for (a, b) in ours.covariance.iter().zip(&whole.covariance) {
                assert!((a - b).abs() <= TOLERANCE * size, "{what}: {a} {b}");
            }
            close(&what, &[ours.log_likelihood], &[whole.log_likelihood]);
            assert_eq!((ours.points, ours.n), (whole.points, whole.n), "{what}");
            assert_eq!(ours.plan, whole.plan, "{what}");
            same_forecast(
                &what,
                &ours.forecast(AHEAD, 0.8, None).expect("a forecast"),
                &whole.forecast(AHEAD, 0.8, None).expect("a forecast"),
            );
        }
        // What was estimated is carried along as it was.
        // Standard errors of what sits at zero are NaN, which equals nothing.
        assert_eq!(format!("{:?}", at_once.parameters), format!("{:?}", before.parameters));
    }
}

#[test]
fn a_plan_can_be_handed_in_and_a_night_without_news_only_changes_it() {
    let request = Request { drivers: vec!["price".to_owned()], ..plain(Trend::LocalLevel) };
    let series = series(&request);
    let without = Series { drivers: vec![wave(0.0)[..OLD].to_vec()], ..history(&series) };
    let standing = fitted(&without, &request).standing();
    let trouble = standing.forecast(AHEAD, 0.9, None).expect_err("no plan");
    assert_eq!(trouble, Trouble::NoDriverPlan { driver: "price".to_owned(), step: 1 });
    let plan = vec![wave(0.0)[OLD..].to_vec()];
    let handed = standing.forecast(AHEAD, 0.9, Some(&plan)).expect("a forecast");
    let planned = standing.advance(&[f64::NAN; 2], &plan).expect("a plan");
    assert_eq!((planned.points, &planned.state), (standing.points, &standing.state));
    assert_eq!(planned.forecast(AHEAD, 0.9, None), Ok(handed));
    // Nothing new at all leaves everything as it was.
    assert_eq!(planned.advance(&[], &[Vec::new()]), Ok(planned.clone()));
}

#[test]
fn new_observations_are_examined() {
    let request = Request {
        drivers: vec!["price".to_owned()],
        transform: TransformRequest::Log,
        ..plain(Trend::LocalLevel)
    };
    let standing = fitted(&history(&series(&request)), &request).standing();
    let flat = vec![vec![1.0; 3]];
    let trouble =
        |observed: &[f64], drivers: &[Vec<f64>]| standing.advance(observed, drivers).expect_err("trouble");
    assert_eq!(trouble(&[50.0, f64::INFINITY], &flat), Trouble::NotFinite { index: 1 });
    assert!(matches!(trouble(&[50.0, -1.0], &flat), Trouble::NotPositive { index: 1, .. }));
    let gap = vec![vec![1.0, f64::NAN]];
    assert_eq!(trouble(&[50.0, 51.0], &gap), Trouble::DriverGap { driver: "price".to_owned(), index: 1 });
    // Where the series is missing, its driver may be too.
    assert!(standing.advance(&[50.0, f64::NAN, 52.0], &[vec![1.0, f64::NAN, 1.0]]).is_ok());
    // One value, or the same twice, is no trouble for a series that has a past.
    assert!(standing.advance(&[50.0, 50.0], &flat).is_ok());
}

/// Far from zero the digits stay: the level is kept apart from a shift.
#[test]
fn an_offset_costs_no_digits() {
    let request = plain(Trend::LocalLevel);
    let base = series(&request);
    for offset in [1e6, 1e9, 1e12] {
        let moved = Series {
            observed: base.observed.iter().map(|v| (v * 1024.0).round() / 1024.0 + offset).collect(),
            ..base.clone()
        };
        let before = fitted(&history(&moved), &request).standing();
        let whole = fitted(&moved, &at_parameters(&request, &before)).standing();
        let advanced = before.advance(&moved.observed[OLD..], &[]).expect("advanced");
        let size = 1.0 + whole.log_likelihood.abs();
        let difference = (advanced.log_likelihood - whole.log_likelihood).abs();
        assert!(difference <= TOLERANCE * size, "{offset:e}: {difference:e}");
    }
}

#[test]
fn what_was_tampered_with_is_found() {
    let request = Request {
        drivers: vec!["price".to_owned()],
        transform: TransformRequest::BoxCox(Some(0.4)),
        season: SeasonRequest::Given(vec![4.0]),
        harmonics: Some(vec![2]),
        ..plain(Trend::Damped)
    };
    let standing = fitted(&history(&series(&request)), &request).standing();
    assert_eq!(standing.contradiction(), None);
    let found = |change: &dyn Fn(&mut Standing)| {
        let mut other = standing.clone();
        change(&mut other);
        other.contradiction().is_some()
    };
    let changes: [&dyn Fn(&mut Standing); 15] = [
        &|s| s.structure.seasons[0].harmonics = Some(500_000_000),
        &|s| s.structure.seasons[0].period = 1e9,
        &|s| s.structure.trend = Trend::LocalLinear,
        &|s| s.structure.autoregression = 5,
        &|s| s.transform = stillwell_statespace::Transform::BoxCox(7.0),
        &|s| s.parameters[0].value = -5.0,
        &|s| s.parameters[0].value = f64::NAN,
        &|s| s.parameters[3].value = 1.5,
        &|s| s.parameters[1].name = "lebel".to_owned(),
        &|s| s.state[0] = f64::INFINITY,
        &|s| s.covariance[0] = -1.0,
        &|s| s.covariance[1] = 1e9,
        &|s| s.plan.clear(),
        &|s| s.n = s.points + 1,
        &|s| s.diffuse = 99,
    ];
    for (index, change) in changes.iter().enumerate() {
        assert!(found(*change), "change {index} goes unnoticed");
    }
}
