//! Bad series: each gives the status that says what is wrong with it, or a result whose numbers are finite. Never a panic.

#[path = "support/plain.rs"]
mod plain;

use plain::plain;
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{
    Fit, Request, SeasonRequest, Series, Transform, TransformRequest, Trouble, Workspace, fit,
};

const STEPS: usize = 4;

/// Trends with a level, simplest first.
const TRENDS: [Trend; 6] = [
    Trend::FixedLevel,
    Trend::LocalLevel,
    Trend::FixedLine,
    Trend::LocalLinear,
    Trend::Smooth,
    Trend::Damped,
];

/// Forty values between -0.5 and 0.5 without a pattern that any structure has.
fn noise() -> Vec<f64> {
    (0..40).map(|t: u32| f64::from((t * t * 7 + t * 3) % 11) / 11.0 - 0.45).collect()
}

fn driver() -> Vec<f64> {
    (0..40 + STEPS).map(|t| (t as f64 * 0.3).sin()).collect()
}

fn attempt(observed: &[f64], request: &Request) -> Result<Fit, Trouble> {
    let series = Series { observed: observed.to_vec(), ..Series::default() };
    fit(&series, request, &mut Workspace::new())
}

fn with_drivers(constant: &[Vec<f64>], drifting: &[Vec<f64>], trend: Trend) -> Result<Fit, Trouble> {
    let series =
        Series { observed: noise(), drivers: constant.to_vec(), drifting_drivers: drifting.to_vec() };
    let names = |kind: &str, count: usize| (0..count).map(|i| format!("{kind}_{i}")).collect();
    let request = Request {
        drivers: names("price", constant.len()),
        drifting_drivers: names("promo", drifting.len()),
        ..plain(trend)
    };
    fit(&series, &request, &mut Workspace::new())
}

/// The trouble of a series under every trend.
#[track_caller]
fn always(observed: &[f64], expected: &Trouble) {
    for trend in TRENDS {
        assert_eq!(&attempt(observed, &plain(trend)).expect_err("trouble"), expected, "{trend:?}");
    }
    // And when everything is left open.
    let open = Request { season: SeasonRequest::Auto(vec![7.0]), ..Request::default() };
    assert_eq!(&attempt(observed, &open).expect_err("trouble"), expected);
}

/// Every number of the fit is finite, and errors and intervals are in order.
#[track_caller]
fn sound(fit: &Fit, what: &str) {
    assert!(fit.converged(), "{what}");
    let still = fit.parameters().iter().any(|p| p.name == "slope" && p.value == 0.0);
    for p in fit.parameters() {
        // A damping has no value exactly where there is no slope to damp.
        assert_eq!(p.value.is_nan(), p.name == "slope_damping" && still, "{what}: {p:?}");
        assert!(p.value.is_nan() || (p.value.is_finite() && p.value >= 0.0), "{what}: {p:?}");
        assert!(p.std_error.is_nan() || (p.std_error > 0.0 && p.std_error.is_finite()), "{what}: {p:?}");
    }
    let d = fit.diagnostics();
    assert!(d.log_likelihood.is_finite() && d.aic.is_finite() && d.bic.is_finite(), "{what}: {d:?}");
    let c = fit.components(0.9).expect("components");
    for state in c.level.iter().chain(&c.slope).chain(&c.seasonal).chain(&c.effects) {
        assert!(state.value.iter().all(|v| v.is_finite()), "{what}");
        assert!(state.std_error.iter().all(|v| v.is_finite() && *v >= 0.0), "{what}");
    }
    assert!((0..c.fitted.len()).all(|t| c.lower[t] <= c.fitted[t] && c.fitted[t] <= c.upper[t]), "{what}");
    let f = fit.forecast(STEPS, 0.9).expect("a forecast");
    for step in 0..STEPS {
        assert!(f.std_error[step].is_finite() && f.std_error[step] >= 0.0, "{what}: {f:?}");
        assert!(f.lower[step] <= f.expected[step] && f.expected[step] <= f.upper[step], "{what}: {f:?}");
        assert!(f.total_lower[step] <= f.total_upper[step], "{what}: {f:?}");
        assert!(f.total_lower[step].is_finite() && f.total_upper[step].is_finite(), "{what}: {f:?}");
    }
}

#[test]
fn nothing_observed() {
    always(&[], &Trouble::AllMissing);
    always(&[f64::NAN], &Trouble::AllMissing);
    always(&[f64::NAN; 50], &Trouble::AllMissing);
}

#[test]
fn never_moving() {
    always(&[3.0; 30], &Trouble::Constant { value: 3.0 });
    always(&[0.0; 30], &Trouble::Constant { value: 0.0 });
    always(&[-1e-300, f64::NAN, -1e-300, -1e-300], &Trouble::Constant { value: -1e-300 });
    assert_eq!(Trouble::Constant { value: 3.0 }.status(), "constant");
}

#[test]
fn out_of_range() {
    let mut observed = noise();
    observed[17] = f64::INFINITY;
    always(&observed, &Trouble::NotFinite { index: 17 });
    observed[17] = f64::NEG_INFINITY;
    always(&observed, &Trouble::NotFinite { index: 17 });
    observed[17] = -1e300;
    always(&observed, &Trouble::TooLarge { index: 17, value: -1e300 });
    observed[17] = f64::MAX;
    always(&observed, &Trouble::TooLarge { index: 17, value: f64::MAX });
    // The first one is named.
    observed[3] = f64::INFINITY;
    always(&observed, &Trouble::NotFinite { index: 3 });
}

#[test]
fn logarithms_of_what_has_none() {
    for value in [0.0, -0.0, -2.5] {
        let mut observed: Vec<f64> = noise().iter().map(|v| v + 10.0).collect();
        observed[5] = value;
        let request = Request { transform: TransformRequest::Log, ..plain(Trend::LocalLevel) };
        let trouble = attempt(&observed, &request).expect_err("no logarithm");
        assert_eq!(trouble, Trouble::NotPositive { index: 5, value, transform: Transform::Log });
        // The rule does not choose the logarithm there.
        let open = Request { transform: TransformRequest::Auto, ..plain(Trend::LocalLevel) };
        assert!(attempt(&observed, &open).expect("a fit").transform() != Transform::Log);
    }
}

#[test]
fn too_few_points() {
    // Needed: one for each diffuse element, one for each estimated parameter, and one more.
    for (trend, needed) in TRENDS.into_iter().zip([3, 4, 4, 6, 5, 6]) {
        for got in 1..needed {
            let trouble = attempt(&noise()[..got], &plain(trend)).expect_err("too short");
            assert_eq!(trouble, Trouble::TooShort { needed, got }, "{trend:?}");
        }
        sound(&attempt(&noise()[..needed], &plain(trend)).expect("enough"), trend.name());
        // Missing points do not count.
        let mut gaps = vec![f64::NAN; 20];
        gaps[..needed - 1].copy_from_slice(&noise()[..needed - 1]);
        let trouble = attempt(&gaps, &plain(trend)).expect_err("too short");
        assert_eq!(trouble, Trouble::TooShort { needed, got: needed - 1 });
        // A season of twelve needs eleven more and one for its variance.
        let season = Request { season: SeasonRequest::Given(vec![12.0]), ..plain(trend) };
        let trouble = attempt(&noise()[..needed + 11], &season).expect_err("too short");
        assert_eq!(trouble, Trouble::TooShort { needed: needed + 12, got: needed + 11 });
        sound(&attempt(&noise()[..needed + 12], &season).expect("enough"), trend.name());
        // What is known need not be estimated.
        let known = Request { known: vec![("irregular".to_owned(), 0.1)], ..plain(trend) };
        let least = if needed == 3 || trend == Trend::FixedLine { needed } else { needed - 1 };
        let trouble = attempt(&noise()[..least - 1], &known).expect_err("too short");
        assert_eq!(trouble, Trouble::TooShort { needed: least, got: least - 1 }, "{trend:?}");
    }
}

#[test]
fn exact_patterns() {
    let line =
        |slope: f64, origin: f64| -> Vec<f64> { (0..40).map(|t| origin + slope * f64::from(t)).collect() };
    for observed in [line(1.0, 0.0), line(0.1, 17.3), line(-1e-9, 0.0), line(1e20, -3.0)] {
        for trend in [Trend::FixedLine, Trend::LocalLinear, Trend::Smooth] {
            let trouble = attempt(&observed, &plain(trend)).expect_err("an exact line");
            assert_eq!(trouble, Trouble::ExactFit, "{trend:?}");
            assert_eq!(trouble.status(), "exact fit");
        }
        // Where the structure has no line, the steps are its level's disturbances.
        for trend in [Trend::FixedLevel, Trend::LocalLevel] {
            sound(&attempt(&observed, &plain(trend)).expect("a fit"), trend.name());
        }
    }
    let season: Vec<f64> = (0..40).map(|t| f64::from(t % 12)).collect();
    for trend in TRENDS.into_iter().filter(|t| *t != Trend::Damped) {
        let request = Request { season: SeasonRequest::Given(vec![12.0]), ..plain(trend) };
        assert_eq!(attempt(&season, &request).expect_err("an exact season"), Trouble::ExactFit, "{trend:?}");
    }
}

#[test]
fn hardly_moving() {
    let two: Vec<f64> = noise().iter().map(|v| f64::from(u8::from(*v > 0.0))).collect();
    let step: Vec<f64> = (0..40).map(|t| f64::from(u8::from(t >= 20))).collect();
    let spike: Vec<f64> = (0..40).map(|t| f64::from(u8::from(t == 20))).collect();
    let turns: Vec<f64> = (0..40).map(|t| f64::from(t % 2)).collect();
    // Moving by rounding alone is no movement.
    let last_bit: Vec<f64> = (0..40).map(|t| if t == 20 { 1.0 + f64::EPSILON } else { 1.0 }).collect();
    for trend in TRENDS {
        assert_eq!(attempt(&last_bit, &plain(trend)).err(), Some(Trouble::ExactFit), "{trend:?}");
    }
    for (name, observed) in [("two values", two), ("step", step), ("spike", spike), ("turns", turns)] {
        for trend in TRENDS {
            let what = format!("{name}, {}", trend.name());
            sound(&attempt(&observed, &plain(trend)).expect(&what), &what);
        }
    }
}

#[test]
fn extreme_scales_and_offsets() {
    for trend in TRENDS {
        let reference = attempt(&noise(), &plain(trend)).expect("a fit");
        let irregular = reference.parameters()[0].value;
        for scale in [1e-12, 1e-100, 1e100, 1e149] {
            let observed: Vec<f64> = noise().iter().map(|v| v * scale).collect();
            let fit = attempt(&observed, &plain(trend)).expect("a fit");
            sound(&fit, &format!("{scale:e}, {}", trend.name()));
            assert!((fit.parameters()[0].value / scale / scale / irregular - 1.0).abs() < 1e-3);
        }
        // Adding 1e9 rounds the noise to 1e-7 and no more.
        for (offset, tolerance) in [(1e9, 1e-3), (-1e9, 1e-3), (1e13, 2e-2)] {
            let observed: Vec<f64> = noise().iter().map(|v| v + offset).collect();
            let fit = attempt(&observed, &plain(trend)).expect("a fit");
            sound(&fit, &format!("{offset:e}, {}", trend.name()));
            assert!((fit.parameters()[0].value / irregular - 1.0).abs() < tolerance);
        }
        let mut spike = noise();
        spike[20] = 1e100;
        sound(&attempt(&spike, &plain(trend)).expect("a fit"), "a spike of 1e100");
    }
}

#[test]
fn states_that_are_known_exactly() {
    // Without irregular and drift every state is known once the points determine it: its variance is zero, or rounding of
    // either sign, and never the root of a negative number.
    let mut observed = vec![0.0; 14];
    (observed[2], observed[10], observed[12], observed[13]) = (f64::NAN, f64::NAN, 1e5, 1e43);
    let plan = (0..14 + STEPS).map(|t| (t % 5) as f64).collect();
    let series = Series { observed, drivers: vec![], drifting_drivers: vec![plan] };
    let request = Request {
        drifting_drivers: vec!["promo".to_owned()],
        known: vec![("irregular".to_owned(), 0.0)],
        ..plain(Trend::LocalLinear)
    };
    let fit = fit(&series, &request, &mut Workspace::new()).expect("a fit");
    sound(&fit, "a drifting driver alone moves");
    let parts = fit.forecast(STEPS, 0.9).expect("a forecast").parts;
    let level = parts.level.expect("a level");
    assert!(level.std_error.iter().all(|e| e.is_finite() && *e >= 0.0));
}

#[test]
fn a_model_without_any_state() {
    // No trend, and a season that the data do not speak for: what is left is noise around zero.
    let observed: Vec<f64> = noise().iter().map(|v| v.exp()).collect();
    for transform in [TransformRequest::None, TransformRequest::Log] {
        let request = Request { season: SeasonRequest::Auto(vec![4.0]), transform, ..plain(Trend::None) };
        let fit = attempt(&observed, &request).expect("a fit");
        assert_eq!(fit.diagnostics().diffuse, 0);
        sound(&fit, "noise");
    }
}

#[test]
fn a_season_with_a_step_that_is_never_observed() {
    let hole: Vec<f64> =
        noise().iter().enumerate().map(|(t, v)| if t % 12 == 3 { f64::NAN } else { *v }).collect();
    for trend in TRENDS {
        let request = Request { season: SeasonRequest::Given(vec![12.0]), ..plain(trend) };
        let trouble = attempt(&hole, &request).expect_err("an open element");
        assert_eq!(trouble.status(), "numerical trouble");
        assert!(trouble.to_string().contains("never observed"), "{trouble}");
    }
}

#[test]
fn drivers_that_repeat_what_is_there() {
    let x = driver();
    let of = |f: fn(f64) -> f64| -> Vec<f64> { x.iter().map(|v| f(*v)).collect() };
    let collinear = |name: &str| Trouble::CollinearDrivers { driver: name.to_owned() };
    for trend in TRENDS {
        // The later one of a pair is named.
        let twin = with_drivers(&[x.clone(), x.clone()], &[], trend);
        assert_eq!(twin.expect_err("twins"), collinear("price_1"), "{trend:?}");
        let affine = with_drivers(&[x.clone(), of(|v| 3.0 * v + 1.0)], &[], trend);
        assert_eq!(affine.expect_err("with the level"), collinear("price_1"), "{trend:?}");
        for constant in [0.0, 0.1, 2.5, -1e9] {
            let flat = vec![constant; 40 + STEPS];
            let trouble = with_drivers(std::slice::from_ref(&flat), &[], trend);
            assert_eq!(trouble.expect_err("a second level"), collinear("price_0"), "{trend:?} {constant}");
            let trouble = with_drivers(&[x.clone(), flat.clone()], &[], trend);
            assert_eq!(trouble.expect_err("a second level"), collinear("price_1"), "{trend:?} {constant}");
            let trouble = with_drivers(&[], &[flat], trend);
            assert_eq!(trouble.expect_err("a second level"), collinear("promo_0"), "{trend:?} {constant}");
        }
        // A driver that only moves where nothing is observed tells nothing either.
        let mut late = vec![0.0; 40 + STEPS];
        late[41] = 1.0;
        assert_eq!(with_drivers(&[late], &[], trend).expect_err("all zero"), collinear("price_0"));
        if trend.has_slope() && trend != Trend::Damped {
            let time = (0..40 + STEPS).map(|t| t as f64).collect();
            assert_eq!(with_drivers(&[time], &[], trend).expect_err("a second slope"), collinear("price_0"));
        }
        // Large, small or far away, a driver of its own is none of this.
        for other in [of(|v| v * 1e100), of(|v| v * 1e-50), of(|v| v + 1e6)] {
            sound(&with_drivers(std::slice::from_ref(&other), &[], trend).expect("a fit"), trend.name());
            sound(&with_drivers(&[], &[other], trend).expect("a fit"), trend.name());
        }
    }
}

#[test]
fn drivers_with_gaps() {
    for value in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e200] {
        let mut x = driver();
        x[12] = value;
        let gap = |driver: &str| Trouble::DriverGap { driver: driver.to_owned(), index: 12 };
        let trouble = with_drivers(&[driver(), x.clone()], &[], Trend::LocalLevel).expect_err("a gap");
        assert_eq!(trouble, gap("price_1"));
        let trouble = with_drivers(&[], &[x], Trend::LocalLevel).expect_err("a gap");
        assert_eq!(trouble, gap("promo_0"));
    }
    // A driver shorter than the series is one with a gap where it ends.
    let trouble = with_drivers(&[driver()[..25].to_vec()], &[], Trend::LocalLevel).expect_err("a gap");
    assert_eq!(trouble, Trouble::DriverGap { driver: "price_0".to_owned(), index: 25 });
}

#[test]
fn a_driver_may_be_unknown_where_the_series_is() {
    let (mut observed, mut x) = (noise(), driver());
    for t in [0, 12, 13] {
        (observed[t], x[t]) = (f64::NAN, f64::NAN);
    }
    let series = Series { observed, drivers: vec![x.clone()], drifting_drivers: vec![] };
    let request = Request { drivers: vec!["price".to_owned()], ..plain(Trend::LocalLevel) };
    let fit = fit(&series, &request, &mut Workspace::new()).expect("a fit");
    let c = fit.components(0.9).expect("components");
    for t in 0..40 {
        let unknown = x[t].is_nan();
        assert_eq!(c.effects[0].value[t].is_nan(), unknown, "{t}");
        assert_eq!(c.fitted[t].is_nan(), unknown, "{t}");
        assert!(c.level.as_ref().expect("a level").value[t].is_finite());
    }
}

#[test]
fn a_line_is_reproduced_whatever_the_trend_and_the_size() {
    for scale in [1.0, 1e-9, 1e9] {
        let line: Vec<f64> = (0..40).map(|t| 1.0 + scale * f64::from(t)).collect();
        for trend in [Trend::FixedLine, Trend::LocalLinear, Trend::Smooth, Trend::Damped] {
            let outcome = attempt(&line, &plain(trend));
            assert_eq!(outcome.err(), Some(Trouble::ExactFit), "{trend:?}, step {scale}");
        }
    }
}

#[test]
fn a_damping_that_shapes_nothing_has_no_value() {
    // Alternation asks for no slope: its variance is zero, and any damping gives the same model.
    let observed: Vec<f64> = (0..40).map(|t| f64::from(t % 2) + 0.01 * f64::from((t * t) % 7)).collect();
    let fit = attempt(&observed, &plain(Trend::Damped)).expect("a fit");
    let value = |name: &str| fit.parameters().iter().find(|p| p.name == name).expect("a parameter").value;
    assert_eq!(value("slope"), 0.0);
    assert!(value("slope_damping").is_nan());
}

#[test]
fn shorter_than_one_season() {
    for (period, harmonics) in [(52.18, None), (60.0, Some(vec![2])), (41.0, Some(vec![3]))] {
        let request =
            Request { season: SeasonRequest::Given(vec![period]), harmonics, ..plain(Trend::LocalLevel) };
        let trouble = attempt(&noise(), &request).expect_err("too short for the season");
        assert_eq!(trouble, Trouble::ShorterThanSeason { period, points: 40 });
        assert_eq!(trouble.status(), "too short");
    }
}

#[test]
fn a_log_forecast_that_leaves_the_range() {
    let observed: Vec<f64> = noise().iter().enumerate().map(|(t, v)| (6.0 * t as f64 + v).exp()).collect();
    let request = Request { transform: TransformRequest::Log, ..plain(Trend::LocalLinear) };
    let fit = attempt(&observed, &request).expect("a fit");
    assert!(fit.forecast(20, 0.9).is_ok());
    assert!(matches!(fit.forecast(120, 0.9), Err(Trouble::Numerical { .. })));
}
