//! Random ugly series under random requests: never a panic, and whatever is answered is finite and in order.
//!
//! Values mix gaps, repeats, spikes, steps and magnitudes up to 1e120; drivers up to 1e12 (a variance is a square,
//! and with a driver a ratio of squares: beyond that they leave the range of doubles). Requests take every form of trend,
//! season and transform, cycles and autoregressions, known values, and what is left open.

use proptest::prelude::*;
use proptest::sample::select;
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{
    Fit, Request, SeasonRequest, Series, State, Transform, TransformRequest, Trouble, Workspace, check, fit,
};

/// Longest horizon asked for; plans reach less far now and then.
const STEPS: usize = 7;

/// One ugly value of a size up to `10^most`.
fn value(most: i32) -> impl Strategy<Value = f64> {
    prop_oneof![
        6 => -3.0..3.0f64,
        3 => select(vec![0.0, -0.0, 1.0, 1.0 + f64::EPSILON, 2.0, -1.0, 0.1]),
        2 => Just(f64::NAN),
        1 => (-most..most).prop_map(|e| 10f64.powi(e)),
        1 => (-most..most).prop_map(|e| -(10f64.powi(e))),
    ]
}

/// A base pattern with some values replaced by ugly ones, scaled and shifted.
fn column(length: usize, most: i32) -> impl Strategy<Value = Vec<f64>> {
    let tame = -1.0..1.0f64;
    let base = prop_oneof![
        proptest::collection::vec(tame, length),
        proptest::collection::vec(value(most), length),
        proptest::collection::vec(select(vec![2.0, 3.0]), length),
        (-5.0..5.0f64, -1.0..1.0f64).prop_map(move |(a, b)| (0..length).map(|t| a + b * t as f64).collect()),
        (2usize..9).prop_map(move |p| (0..length).map(|t| (t % p) as f64).collect()),
        (0.01..1.0f64).prop_map(move |g| (0..length).map(|t| (g * t as f64).exp()).collect()),
        Just(vec![f64::NAN; length]),
        Just(vec![7.0; length]),
    ];
    let replaced = proptest::collection::vec((0..length.max(1), value(most)), 0..6);
    let scale = prop_oneof![3 => Just(1.0), 1 => (-most / 5..most / 5).prop_map(|e| 10f64.powi(e))];
    let offset = select(vec![0.0, 0.0, 10.0, 1e9, -1e12]);
    (base, replaced, scale, offset).prop_map(|(mut values, replaced, scale, offset)| {
        for (t, v) in replaced {
            if let Some(slot) = values.get_mut(t) {
                *slot = v;
            }
        }
        values.iter().map(|v| v * scale + offset).collect()
    })
}

fn trends() -> impl Strategy<Value = Option<Trend>> {
    prop_oneof![Just(None), select(Trend::ALL.to_vec()).prop_map(|(_, trend)| Some(trend))]
}

fn seasons() -> impl Strategy<Value = (SeasonRequest, Option<Vec<usize>>)> {
    prop_oneof![
        3 => Just((SeasonRequest::Given(Vec::new()), None)),
        1 => select(vec![2.0, 4.0, 7.0]).prop_map(|p| (SeasonRequest::Given(vec![p]), None)),
        1 => select(vec![5.0, 6.5, 12.0]).prop_map(|p| (SeasonRequest::Given(vec![p]), Some(vec![2]))),
        1 => Just((SeasonRequest::Given(vec![3.0, 7.0]), None)),
        1 => Just((SeasonRequest::Auto(vec![4.0, 7.0]), None)),
    ]
}

fn known() -> impl Strategy<Value = Vec<(String, f64)>> {
    let one =
        |name: &'static str, values: Vec<f64>| select(values).prop_map(move |v| vec![(name.to_owned(), v)]);
    prop_oneof![
        4 => Just(Vec::new()),
        1 => one("irregular", vec![0.0, 1e-30, 1.0, 1e80]),
        1 => one("level", vec![0.0, 1.0]),
        1 => one("slope_damping", vec![1e-9, 0.5, 1.0 - 1e-9]),
    ]
}

prop_compose! {
    fn requests()(
        trend in trends(),
        (season, harmonics) in seasons(),
        fixed_season in any::<bool>(),
        cycle in prop_oneof![5 => Just(None), 1 => Just(Some((3.0, 9.0)))],
        autoregression in prop_oneof![5 => Just(0usize), 1 => 1usize..3],
        transform in select(vec![
            TransformRequest::None,
            TransformRequest::Log,
            TransformRequest::Auto,
            TransformRequest::Log1p,
            TransformRequest::BoxCox(Some(0.3)),
            TransformRequest::BoxCox(None),
        ]),
        known in known(),
        drivers in 0usize..3,
        drifting in prop_oneof![3 => Just(0usize), 1 => Just(1usize)],
    ) -> Request {
        let names = |kind: &str, count: usize| (0..count).map(|i| format!("{kind}_{i}")).collect();
        Request {
            trend, season, harmonics, fixed_season, cycle, autoregression, transform, known,
            drivers: names("price", drivers),
            drifting_drivers: names("promo", drifting),
        }
    }
}

prop_compose! {
    fn settings()(length in prop_oneof![4 => 12usize..50, 1 => 0usize..12])(
        request in requests().prop_filter("the request is valid", |r| check(r).is_ok()),
        observed in column(length, 100),
        columns in proptest::collection::vec(column(length + STEPS, 10), 3),
    ) -> (Series, Request) {
        let constant = columns[..request.drivers.len()].to_vec();
        let drifting = columns[2..2 + request.drifting_drivers.len()].to_vec();
        (Series { observed, drivers: constant, drifting_drivers: drifting }, request)
    }
}

/// Values and errors of one component, where `known` says that they are defined.
fn state(what: &str, state: &State, known: impl Fn(usize) -> bool) -> Result<(), TestCaseError> {
    for (t, (value, error)) in state.value.iter().zip(&state.std_error).enumerate() {
        if known(t) {
            prop_assert!(value.is_finite(), "{what} at {t}: {value}");
            // Taken back from the logarithm an error may leave the range of doubles where its value is near the end of it.
            prop_assert!(
                *error >= 0.0 && (error.is_finite() || *value > 1e100)
                    // A level cut at zero has no error that its slope could tell.
                    || *value == 0.0 && error.is_nan(),
                "{what} at {t}: error {error}"
            );
        }
    }
    Ok(())
}

fn sound(fit: &Fit, series: &Series) -> Result<(), TestCaseError> {
    for p in fit.parameters() {
        let variance = !(p.name.starts_with("ar_"));
        // What shapes a component without variance has no value.
        let still = |of: &str| fit.parameters().iter().any(|v| v.name == of && v.value == 0.0);
        let shapes_nothing = !p.known
            && ((p.name == "slope_damping" && still("slope"))
                || (p.name.starts_with("cycle_") && still("cycle"))
                || (p.name.starts_with("ar_") && still("autoregression")));
        prop_assert_eq!(p.value.is_nan(), shapes_nothing, "{:?}", p);
        prop_assert!(shapes_nothing || (p.value.is_finite() && (p.value >= 0.0 || !variance)), "{:?}", p);
        prop_assert!(p.std_error.is_nan() || (p.std_error >= 0.0 && p.std_error.is_finite()), "{p:?}");
    }
    let d = fit.diagnostics();
    prop_assert!(d.log_likelihood.is_finite() && d.aic.is_finite() && d.bic.is_finite(), "{d:?}");
    for p in [d.q_p, d.h_p, d.skewness_p, d.kurtosis_p, d.normality_p] {
        prop_assert!(p.is_nan() || (0.0..=1.0).contains(&p), "{d:?}");
    }
    for r in [d.r_squared, d.r_squared_season] {
        prop_assert!(r.is_nan() || r <= 1.0, "{d:?}");
    }
    for (value, error) in fit.coefficients() {
        prop_assert!(value.is_finite() && error.is_finite() && error >= 0.0, "coefficient {value} {error}");
    }

    let columns = || series.drivers.iter().chain(&series.drifting_drivers);
    let driven = |t: usize| columns().all(|x| x[t].is_finite());
    let c = fit.components(0.9).expect("components");
    for (name, part) in
        [("level", &c.level), ("slope", &c.slope), ("season", &c.seasonal), ("cycle", &c.cycle)]
    {
        if let Some(part) = part {
            state(name, part, |_| true)?;
        }
    }
    for effect in &c.effects {
        state("effect", effect, driven)?;
    }
    for t in 0..series.observed.len() {
        let seen = !series.observed[t].is_nan();
        if driven(t) {
            prop_assert!(c.fitted[t].is_finite(), "fitted at {t}: {}", c.fitted[t]);
            prop_assert!(c.lower[t] <= c.fitted[t] && c.fitted[t] <= c.upper[t], "interval at {t}");
        }
        // As a factor it has no value where a driver of 1e12 throws the fitted value out of the range of doubles.
        let in_range = fit.transform() == Transform::None || (1e-100..1e100).contains(&c.fitted[t]);
        prop_assert!(!in_range || c.irregular[t].is_finite() == seen, "irregular at {t}: {}", c.irregular[t]);
        prop_assert!(seen || c.irregular[t].is_nan(), "irregular at {t}: {}", c.irregular[t]);
        for value in [c.outlier_t[t], c.shift_t[t], fit.standardised_errors()[t]] {
            prop_assert!(!value.is_infinite(), "t-value at {t}");
        }
    }

    let planned = (0..STEPS).take_while(|s| driven(series.observed.len() + s)).count();
    if planned < STEPS {
        let trouble = fit.forecast(STEPS, 0.9).expect_err("no plan");
        prop_assert!(matches!(trouble, Trouble::NoDriverPlan { .. }), "{trouble}");
    }
    let f = match fit.forecast(planned, 0.9) {
        Ok(forecast) => forecast,
        // A log model may leave the range of double precision; then it says so.
        Err(Trouble::Numerical { .. }) if fit.transform() != Transform::None => return Ok(()),
        Err(trouble) => return Err(TestCaseError::fail(trouble.to_string())),
    };
    for s in 0..planned {
        prop_assert!(f.expected[s].is_finite() && f.std_error[s] >= 0.0, "{f:?}");
        prop_assert!(f.lower[s] <= f.upper[s] && f.total_lower[s] <= f.total_upper[s], "{f:?}");
        prop_assert!(!f.total_expected[s].is_nan(), "{f:?}");
        if fit.transform() == Transform::None {
            prop_assert!(
                f.std_error[s].is_finite() && f.total_lower[s].is_finite() && f.total_upper[s].is_finite()
            );
            prop_assert!(f.lower[s] <= f.expected[s] && f.expected[s] <= f.upper[s], "{f:?}");
        }
    }
    Ok(())
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn an_answer_or_a_status((series, request) in settings()) {
        match fit(&series, &request, &mut Workspace::new()) {
            Ok(fit) => sound(&fit, &series)?,
            Err(trouble) => {
                prop_assert!(Trouble::STATUSES.contains(&trouble.status()));
                prop_assert!(!trouble.to_string().is_empty());
            }
        }
    }
}
