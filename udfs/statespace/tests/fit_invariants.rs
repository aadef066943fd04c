//! What must not matter to a fit: the unit, the origin and the sign of the data, gaps before the first point, what was fitted
//! before it, and whether a choice was made by the caller or by the stated rule.
//!
//! A change of unit by a power of two moves no bit. Any other change rounds differently, and the climb may then stop one step
//! sooner or later: estimates agree as far as the stopping rule determines them (a gain of 1e-7 in likelihood is 4e-4 of a
//! standard error), and everything agrees to 1e-8 once the parameters are given.

#[path = "support/plain.rs"]
mod plain;
#[path = "support/series.rs"]
mod series;

use plain::plain;
use series::column;
use stillwell_statespace::structure::{Season, Structure, Trend};
use stillwell_statespace::{
    Components, Fit, Forecast, Request, SeasonRequest, Series, State, Transform, TransformRequest, Workspace,
    fit,
};

const STEPS: usize = 12;
const COVERAGE: f64 = 0.9;

/// One fit of the tour below.
struct Case {
    name: String,
    series: Series,
    request: Request,
}

impl Case {
    fn fit(&self) -> Fit {
        fit(&self.series, &self.request, &mut Workspace::new()).expect(&self.name)
    }

    /// The same with all parameters given, as `fit` found them on data of `unit` times this size.
    fn at(&self, fit: &Fit, unit: f64) -> Self {
        let names = fit.parameters().iter().map(|p| p.name.clone());
        let known = names.zip(parameters(fit, unit).chunks(2).map(|p| p[0])).collect();
        Self {
            name: self.name.clone(),
            series: self.series.clone(),
            request: Request { known, ..self.request.clone() },
        }
    }

    fn map(&self, f: impl Fn(f64) -> f64) -> Self {
        let observed = self.series.observed.iter().map(|v| f(*v)).collect();
        Self {
            name: self.name.clone(),
            series: Series { observed, ..self.series.clone() },
            request: self.request.clone(),
        }
    }
}

/// Every trend form, season form and driver form at least once, with gaps.
fn cases() -> Vec<Case> {
    let gaps = |mut values: Vec<f64>| {
        for t in [7, 30, 31, 32, 33, 60] {
            values[t] = f64::NAN;
        }
        values
    };
    let mut cases: Vec<Case> = Trend::ALL
        .iter()
        .filter(|(_, trend)| *trend != Trend::None)
        .map(|&(name, trend)| {
            // The Nile has no slope; output does, and its damping is determined.
            let source = if trend == Trend::Damped { "realgdp_ln" } else { "nile" };
            let series = Series { observed: gaps(column(source, "y")), ..Series::default() };
            Case { name: name.to_owned(), series, request: plain(trend) }
        })
        .collect();
    let monthly = |trend| Request { season: SeasonRequest::Given(vec![12.0]), ..plain(trend) };
    let drivers = Series { observed: gaps(column("drivers_ln", "y")), ..Series::default() };
    let flat = |name: &str| {
        let mut x = column("drivers_ln", name);
        x.extend(vec![x[x.len() - 1]; STEPS]);
        x
    };
    let mut add = |name: &str, series: Series, request| {
        cases.push(Case { name: name.to_owned(), series, request });
    };
    add("dummy season", drivers.clone(), monthly(Trend::LocalLevel));
    let harmonics = Request { harmonics: Some(vec![3]), ..monthly(Trend::LocalLinear) };
    add("harmonics", drivers.clone(), harmonics);
    let with_drivers = Series { drivers: vec![flat("log_petrol"), flat("law")], ..drivers.clone() };
    add(
        "drivers and fixed season",
        with_drivers,
        Request {
            drivers: vec!["petrol".to_owned(), "law".to_owned()],
            fixed_season: true,
            ..monthly(Trend::LocalLevel)
        },
    );
    add(
        "drifting driver",
        Series { drifting_drivers: vec![flat("log_petrol")], ..drivers },
        Request { drifting_drivers: vec!["petrol".to_owned()], ..monthly(Trend::LocalLevel) },
    );
    cases
}

/// Every number of a fit that has the unit of the data, in a fixed order.
fn linear_numbers(fit: &Fit) -> Vec<f64> {
    let components = fit.components(COVERAGE).expect("components");
    let forecast = fit.forecast(STEPS, COVERAGE).expect("a forecast");
    let mut all: Vec<f64> = fit.coefficients().iter().flat_map(|&(b, se)| [b, se]).collect();
    let states = |c: &Components| -> Vec<State> {
        [&c.level, &c.slope, &c.seasonal, &c.cycle]
            .into_iter()
            .flatten()
            .chain(&c.effects)
            .chain(&c.coefficients)
            .cloned()
            .collect()
    };
    for state in states(&components).into_iter().chain(states(&forecast.parts)) {
        all.extend(state.value);
        all.extend(state.std_error);
    }
    let Components { irregular, fitted, lower, upper, .. } = components;
    all.extend([irregular, fitted, lower, upper].concat());
    let Forecast { expected, std_error, lower, upper, total_expected, total_lower, total_upper, .. } =
        forecast;
    all.extend([expected, std_error, lower, upper, total_expected, total_lower, total_upper].concat());
    all
}

/// Every number that has no unit: t-values, standardised errors and checks.
fn free_numbers(fit: &Fit) -> Vec<f64> {
    let d = fit.diagnostics();
    let components = fit.components(COVERAGE).expect("components");
    let mut all =
        vec![d.q, d.q_p, d.h, d.h_p, d.skewness, d.kurtosis, d.normality, d.r_squared, d.r_squared_season];
    all.extend(components.outlier_t);
    all.extend(components.shift_t);
    all.extend_from_slice(fit.standardised_errors());
    all
}

fn bits(values: impl IntoIterator<Item = f64>) -> Vec<u64> {
    values.into_iter().map(|v| if v.is_nan() { u64::MAX } else { v.to_bits() }).collect()
}

/// Parameters: variances over the square of `unit`, others as they are.
fn parameters(fit: &Fit, unit: f64) -> Vec<f64> {
    fit.parameters()
        .iter()
        .flat_map(|p| {
            let factor = if p.name == "slope_damping" { 1.0 } else { unit * unit };
            [p.value / factor, p.std_error / factor]
        })
        .collect()
}

#[track_caller]
fn close(name: &str, ours: &[f64], other: &[f64], tolerance: f64) {
    assert_eq!(ours.len(), other.len());
    let worst = ours
        .iter()
        .zip(other)
        .map(|(a, b)| {
            assert_eq!(a.is_nan(), b.is_nan(), "{name}: {a} and {b}");
            if a.is_nan() { 0.0 } else { (a - b).abs() }
        })
        .fold(0.0_f64, f64::max);
    println!("{name:44} worst difference {worst:8.1e}");
    assert!(worst <= tolerance, "{name}: worst difference {worst:e}");
}

#[test]
fn powers_of_two_change_no_bit() {
    for case in cases() {
        let plain = case.fit();
        for exponent in [-60, -3, 1, 40] {
            let unit = f64::exp2(f64::from(exponent));
            let scaled = case.map(|v| v * unit).fit();
            let what = format!("{} times 2^{exponent}", case.name);
            assert_eq!(bits(parameters(&scaled, unit)), bits(parameters(&plain, 1.0)), "{what}");
            let rescaled = linear_numbers(&scaled).into_iter().map(|v| v / unit);
            assert_eq!(bits(rescaled), bits(linear_numbers(&plain)), "{what}");
            assert_eq!(bits(free_numbers(&scaled)), bits(free_numbers(&plain)), "{what}");
            assert_eq!(scaled.evaluations(), plain.evaluations(), "{what}");
            // The density of y * unit is that of y over unit, per point that is not spent on a diffuse element.
            let (a, b) = (scaled.diagnostics(), plain.diagnostics());
            let constant = (b.n - b.diffuse) as f64 * unit.ln();
            assert!((a.log_likelihood + constant - b.log_likelihood).abs() < 1e-9, "{what}");
        }
    }
}

#[test]
fn the_sign_changes_no_bit() {
    for case in cases() {
        let (plain, turned) = (case.fit(), case.map(|v| -v).fit());
        assert_eq!(bits(parameters(&turned, 1.0)), bits(parameters(&plain, 1.0)), "{}", case.name);
        let (a, b) =
            (turned.forecast(STEPS, COVERAGE).expect("one"), plain.forecast(STEPS, COVERAGE).expect("two"));
        let negative = |v: &[f64]| bits(v.iter().map(|v| -v));
        assert_eq!(negative(&a.expected), bits(b.expected), "{}", case.name);
        assert_eq!(negative(&a.upper), bits(b.lower), "{}", case.name);
        assert_eq!(negative(&a.total_lower), bits(b.total_upper), "{}", case.name);
        let (a, b) = (plain.components(COVERAGE).expect("one"), turned.components(COVERAGE).expect("two"));
        assert_eq!(negative(&a.fitted), bits(b.fitted), "{}", case.name);
        assert_eq!(negative(&a.outlier_t), bits(b.outlier_t), "{}", case.name);
        assert_eq!(negative(&a.shift_t), bits(b.shift_t), "{}", case.name);
    }
}

/// Likelihood and estimates agree as far as the stopping rule goes.
#[track_caller]
fn same_optimum(what: &str, ours: &Fit, unit: f64, other: &Fit) {
    let constant = ours.diagnostics();
    let constant = (constant.n - constant.diffuse) as f64 * unit.ln();
    close(what, &[ours.diagnostics().log_likelihood + constant], &[other.diagnostics().log_likelihood], 2e-7);
    for (ours, other) in parameters(ours, unit).chunks(2).zip(parameters(other, 1.0).chunks(2)) {
        assert_eq!(ours[0] == 0.0, other[0] == 0.0, "{what}: zero or not");
        let error = if other[1].is_nan() { 1.0 } else { other[1] };
        close(what, &[ours[0] / error], &[other[0] / error], 2e-3);
    }
}

#[test]
fn unit_and_origin_do_not_matter() {
    for case in cases() {
        let plain = case.fit();
        let size = case.series.observed.iter().filter(|v| !v.is_nan()).fold(0.0_f64, |a, v| a.max(v.abs()));
        let shift = 3.7 * size;
        for (unit, shift) in [(0.3, 0.0), (1000.0, 0.0), (1.0, shift), (1.0, -shift), (0.7, shift)] {
            let what = format!("{} * {unit} + {shift:.0}", case.name);
            let moved = case.map(|v| v * unit + shift);
            same_optimum(&what, &moved.fit(), unit, &plain);

            let (moved, plain) = (moved.at(&plain, 1.0 / unit).fit(), case.at(&plain, 1.0).fit());
            let (a, b) = (
                moved.forecast(STEPS, COVERAGE).expect("one"),
                plain.forecast(STEPS, COVERAGE).expect("two"),
            );
            let back = |v: &[f64]| -> Vec<f64> { v.iter().map(|v| (v - shift) / unit / size).collect() };
            let own = |v: &[f64]| -> Vec<f64> { v.iter().map(|v| v / size).collect() };
            close(&what, &back(&a.expected), &own(&b.expected), 1e-8);
            close(&what, &back(&a.upper), &own(&b.upper), 1e-8);
            let (a, b) = (moved.components(COVERAGE).expect("one"), plain.components(COVERAGE).expect("two"));
            close(&what, &back(&a.fitted), &own(&b.fitted), 1e-8);
            let (x, y) = (a.level.expect("a level"), b.level.expect("a level"));
            close(&what, &back(&x.value), &own(&y.value), 1e-8);
            close(&what, &a.outlier_t, &b.outlier_t, 1e-8);
            close(&what, &a.shift_t, &b.shift_t, 1e-8);
            close(&what, moved.standardised_errors(), plain.standardised_errors(), 1e-8);
        }
    }
}

#[test]
fn missing_points_before_the_first_do_not_matter() {
    const LEAD: usize = 5;
    for case in cases() {
        let what = &case.name;
        let lead = |v: &Vec<f64>| [vec![f64::NAN; LEAD], v.clone()].concat();
        let series = Series {
            observed: lead(&case.series.observed),
            drivers: case.series.drivers.iter().map(lead).collect(),
            drifting_drivers: case.series.drifting_drivers.iter().map(lead).collect(),
        };
        let (plain, later) = (case.fit(), Case { series, ..case.map(|v| v) });
        let estimated = later.fit();
        same_optimum(what, &estimated, 1.0, &plain);
        let (a, b) = (estimated.diagnostics(), plain.diagnostics());
        assert_eq!((a.n, a.missing, a.estimated, a.diffuse), (b.n, b.missing, b.estimated, b.diffuse));

        let (later, plain) = (later.at(&plain, 1.0).fit(), case.at(&plain, 1.0).fit());
        close(what, &[later.diagnostics().log_likelihood], &[plain.diagnostics().log_likelihood], 1e-8);
        let (a, b) =
            (later.forecast(STEPS, COVERAGE).expect("one"), plain.forecast(STEPS, COVERAGE).expect("two"));
        let size = b.expected[0].abs();
        close(what, &a.expected, &b.expected, 1e-8 * size);
        close(what, &a.total_upper, &b.total_upper, 1e-8 * size * STEPS as f64);
        let (a, b) = (later.components(COVERAGE).expect("one"), plain.components(COVERAGE).expect("two"));
        close(what, &a.fitted[LEAD..], &b.fitted, 1e-8 * size);
        assert!(a.irregular[..LEAD].iter().all(|v| v.is_nan()));
        // The signal before the first observation is a backcast, unless a driver is not known there.
        let driven = !case.series.drivers.is_empty() || !case.series.drifting_drivers.is_empty();
        assert!(a.fitted[..LEAD].iter().all(|v| v.is_nan() == driven), "{what}: {:?}", &a.fitted[..LEAD]);
    }
}

#[test]
fn a_missing_point_equals_a_dropped_one_where_order_is_all_there_is() {
    // With a fixed level time plays no part; with time as an explicit driver it is in the driver.
    let observed = column("nile", "y");
    let time: Vec<f64> = (0..observed.len()).map(|t| t as f64).collect();
    let gone = [0, 1, 17, 40, 41, 42, 99];
    let missing: Vec<f64> =
        observed.iter().enumerate().map(|(t, v)| if gone.contains(&t) { f64::NAN } else { *v }).collect();
    let keep = |v: &[f64]| -> Vec<f64> {
        v.iter().enumerate().filter(|(t, _)| !gone.contains(t)).map(|(_, v)| *v).collect()
    };
    for drivers in [vec![], vec!["time".to_owned()]] {
        let request = Request { drivers: drivers.clone(), ..plain(Trend::FixedLevel) };
        let of = |observed: Vec<f64>, time: Vec<f64>| {
            let series = Series {
                observed,
                drivers: drivers.iter().map(|_| time.clone()).collect(),
                ..Series::default()
            };
            fit(&series, &request, &mut Workspace::new()).expect("a fit")
        };
        let (a, b) = (of(missing.clone(), time.clone()), of(keep(&observed), keep(&time)));
        let scale = parameters(&b, 1.0)[0];
        close("variance", &[parameters(&a, 1.0)[0] / scale], &[1.0], 1e-10);
        close("likelihood", &[a.diagnostics().log_likelihood], &[b.diagnostics().log_likelihood], 1e-9);
        for ((x, x_error), (y, y_error)) in a.coefficients().into_iter().zip(b.coefficients()) {
            close("coefficient", &[x / y, x_error / y_error], &[1.0, 1.0], 1e-10);
        }
        let errors = |fit: &Fit| -> Vec<f64> {
            fit.standardised_errors().iter().copied().filter(|e| !e.is_nan()).collect()
        };
        close("one-step errors", &errors(&a), &errors(&b), 1e-9);
        assert_eq!((a.diagnostics().n, a.diagnostics().missing), (93, 5));
    }
    // And the fixed line is the fixed level with time as a driver.
    let line = fit(
        &Series { observed: missing.clone(), ..Series::default() },
        &plain(Trend::FixedLine),
        &mut Workspace::new(),
    )
    .expect("a line");
    let slope = line.components(COVERAGE).expect("components").slope.expect("a slope");
    let driver = fit(
        &Series { observed: missing, drivers: vec![time], ..Series::default() },
        &Request { drivers: vec!["time".to_owned()], ..plain(Trend::FixedLevel) },
        &mut Workspace::new(),
    )
    .expect("a driver");
    let (value, std_error) = driver.coefficients()[0];
    close("slope", &[slope.value[50], slope.std_error[50]], &[value, std_error], 1e-9 * value.abs());
    close("likelihood", &[line.diagnostics().log_likelihood], &[driver.diagnostics().log_likelihood], 1e-9);
}

#[test]
fn number_of_estimated_parameters() {
    // Common practice: local level 2, local linear 3, with a season one more. Damped adds its damping; what is fixed has none.
    let dummy = vec![Season { period: 4.0, harmonics: None, fixed: false }];
    let fixed = vec![Season { period: 4.0, harmonics: None, fixed: true }];
    for (trend, without, with, diffuse) in [
        (Trend::FixedLevel, 1, 2, 1),
        (Trend::LocalLevel, 2, 3, 1),
        (Trend::FixedLine, 1, 2, 2),
        (Trend::LocalLinear, 3, 4, 2),
        (Trend::Smooth, 2, 3, 2),
        (Trend::Damped, 4, 5, 1),
    ] {
        for (seasons, expected, season) in
            [(vec![], without, 0), (dummy.clone(), with, 3), (fixed.clone(), without, 3)]
        {
            let structure = Structure { trend, seasons, ..Structure::default() };
            assert_eq!(structure.model().parameters().len(), expected, "{structure:?}");
            assert_eq!(structure.diffuse_elements(), diffuse + season, "{structure:?}");
            let request = Request {
                season: SeasonRequest::Given(structure.seasons.iter().map(|s| s.period).collect()),
                fixed_season: structure.seasons.iter().any(|s| s.fixed),
                ..plain(trend)
            };
            let series = Series { observed: column("nile", "y"), ..Series::default() };
            let fit = fit(&series, &request, &mut Workspace::new()).expect("a fit");
            let d = fit.diagnostics();
            assert_eq!((d.estimated, d.diffuse), (expected, diffuse + season), "{structure:?}");
            // AIC = -2 l + 2 (w + d), BIC = -2 l + (w + d) log n.
            let count = (expected + diffuse + season) as f64;
            assert!((d.aic - (-2.0 * d.log_likelihood + 2.0 * count)).abs() < 1e-9);
            assert!((d.bic - (-2.0 * d.log_likelihood + count * 100.0_f64.ln())).abs() < 1e-9);
        }
    }
}

#[test]
fn known_parameters_are_respected() {
    let series = Series { observed: column("nile", "y"), ..Series::default() };
    let names = ["irregular", "level", "slope", "slope_damping"];
    let free = fit(&series, &plain(Trend::Damped), &mut Workspace::new()).expect("a fit");
    for given in [
        vec![("irregular", 0.0)],
        vec![("level", 0.0)],
        vec![("irregular", 12_000.0)],
        vec![("slope_damping", 0.7)],
        vec![("slope_damping", 0.7), ("slope", 0.0), ("level", 2_000.0)],
        vec![("irregular", 15_000.0), ("level", 1_000.0), ("slope", 10.0), ("slope_damping", 0.5)],
    ] {
        let known = given.iter().map(|(n, v)| ((*n).to_owned(), *v)).collect();
        let fit =
            fit(&series, &Request { known, ..plain(Trend::Damped) }, &mut Workspace::new()).expect("a fit");
        assert_eq!(fit.diagnostics().estimated, 4 - given.len());
        for (parameter, name) in fit.parameters().iter().zip(names) {
            assert_eq!(parameter.name, name);
            let value = given.iter().find(|(n, _)| *n == name).map(|(_, v)| *v);
            assert_eq!(parameter.known, value.is_some());
            if let Some(value) = value {
                assert_eq!(parameter.value, value, "{name}");
                assert!(parameter.std_error.is_nan(), "a given number has no standard error");
            }
        }
        // A constraint cannot raise the maximum.
        let (bound, best) = (fit.diagnostics().log_likelihood, free.diagnostics().log_likelihood);
        assert!(bound <= best + 1e-6, "{given:?}: {bound} above {best}");
    }
}

#[test]
fn a_damping_that_is_not_determined_hides_no_other_error() {
    // The slope of the Nile is zero: its damping is arbitrary, the rest is the local level with its standard errors.
    let series = Series { observed: column("nile", "y"), ..Series::default() };
    let [damped, level] = [Trend::Damped, Trend::LocalLevel]
        .map(|trend| fit(&series, &plain(trend), &mut Workspace::new()).expect("a fit"));
    let [_, _, slope, damping] = damped.parameters() else { panic!("four parameters") };
    assert_eq!(slope.value, 0.0);
    assert!(slope.std_error.is_nan() && damping.std_error.is_nan());
    for (a, b) in damped.parameters().iter().zip(level.parameters()) {
        close(&a.name, &[a.value / b.std_error], &[b.value / b.std_error], 2e-3);
        close(&a.name, &[a.std_error / b.std_error], &[1.0], 2e-3);
    }
}

#[test]
fn the_same_input_gives_the_same_bits() {
    let all = |fit: &Fit| {
        let mut numbers = parameters(fit, 1.0);
        numbers.extend(linear_numbers(fit));
        numbers.extend(free_numbers(fit));
        let d = fit.diagnostics();
        numbers.extend([d.log_likelihood, d.evaluations as f64]);
        bits(numbers)
    };
    let cases = cases();
    let alone: Vec<Vec<u64>> = cases.iter().map(|case| all(&case.fit())).collect();
    // Through one workspace, forward and backward: what was fitted before leaves no trace.
    let mut workspace = Workspace::new();
    for i in (0..cases.len()).chain((0..cases.len()).rev()) {
        let fit = fit(&cases[i].series, &cases[i].request, &mut workspace).expect("a fit");
        assert_eq!(all(&fit), alone[i], "{}", cases[i].name);
    }
}

#[test]
fn a_choice_left_open_equals_the_same_choice_named() {
    let counts = column("airpassengers_ln", "y").iter().map(|v| v.exp().round()).collect();
    for (observed, period) in [(counts, 12.0), (column("nile", "y"), 7.0), (column("nottem", "y"), 12.0)] {
        let series = Series { observed, ..Series::default() };
        let open = Request { season: SeasonRequest::Auto(vec![period]), ..Request::default() };
        let chosen = fit(&series, &open, &mut Workspace::new()).expect("a fit");
        let structure = chosen.structure();
        let named = Request {
            season: SeasonRequest::Given(structure.seasons.iter().map(|s| s.period).collect()),
            transform: if chosen.transform() == Transform::Log {
                TransformRequest::Log
            } else {
                TransformRequest::None
            },
            ..plain(structure.trend)
        };
        let same = fit(&series, &named, &mut Workspace::new()).expect("a fit");
        assert_eq!(same.structure(), structure);
        assert_eq!(bits(parameters(&same, 1.0)), bits(parameters(&chosen, 1.0)));
        assert_eq!(bits(linear_numbers(&same)), bits(linear_numbers(&chosen)));
        println!("{structure:?}, {:?}", chosen.transform());
    }
}
