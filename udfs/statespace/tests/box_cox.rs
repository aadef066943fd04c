//! Transforms with zeros and with a power: against what they equal exactly, closed forms, drawn paths and a general-purpose library.

#[path = "support/dense.rs"]
mod dense;
#[path = "support/plain.rs"]
mod plain;
#[path = "support/series.rs"]
mod series;

use dense::future;
use nalgebra::DVector;
use plain::plain;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use series::column;
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{
    Fit, Request, SeasonRequest, Series, Transform, TransformRequest, Trouble, Workspace, fit,
};

const STEPS: usize = 12;

fn passengers() -> Vec<f64> {
    let mut observed: Vec<f64> = column("airpassengers_ln", "y").iter().map(|v| v.exp().round()).collect();
    observed[50] = f64::NAN;
    observed
}

fn fitted(observed: Vec<f64>, transform: TransformRequest) -> Fit {
    let request =
        Request { season: SeasonRequest::Given(vec![12.0]), transform, ..plain(Trend::LocalLinear) };
    fit(&Series { observed, ..Series::default() }, &request, &mut Workspace::new()).expect("a fit")
}

#[track_caller]
fn close(ours: &[f64], other: &[f64], tolerance: f64) {
    assert_eq!(ours.len(), other.len());
    for (t, (a, b)) in ours.iter().zip(other).enumerate() {
        assert!(a.is_nan() == b.is_nan(), "{t}: {a} {b}");
        assert!(a.is_nan() || (a - b).abs() <= tolerance * (1.0 + b.abs()), "{t}: {a} {b}");
    }
}

fn values(fit: &Fit) -> Vec<f64> {
    fit.parameters().iter().map(|p| p.value).collect()
}

#[test]
fn log1p_is_the_logarithm_of_one_more() {
    let mut observed = passengers();
    observed.iter_mut().for_each(|v| *v -= 104.0);
    observed[0] = 0.0;
    let more: Vec<f64> = observed.iter().map(|v| v + 1.0).collect();
    let (one, log) = (fitted(observed, TransformRequest::Log1p), fitted(more, TransformRequest::Log));
    close(&values(&one), &values(&log), 1e-7);
    let less = |x: &[f64]| x.iter().map(|v| v - 1.0).collect::<Vec<f64>>();
    let (a, b) = (one.components(0.9).unwrap(), log.components(0.9).unwrap());
    close(&a.fitted, &less(&b.fitted), 1e-7);
    close(&a.lower, &less(&b.lower), 1e-7);
    close(&a.irregular, &b.irregular, 1e-7);
    close(&a.level.unwrap().value, &less(&b.level.unwrap().value), 1e-7);
    close(&a.seasonal.unwrap().value, &b.seasonal.unwrap().value, 1e-7);
    let (a, b) = (one.forecast(STEPS, 0.9).unwrap(), log.forecast(STEPS, 0.9).unwrap());
    close(&a.expected, &less(&b.expected), 1e-6);
    close(&a.std_error, &b.std_error, 1e-6);
    // A sum of k steps has k ones less in it.
    for (ours, other) in [(&a.total_expected, &b.total_expected), (&a.total_upper, &b.total_upper)] {
        let less: Vec<f64> = other.iter().enumerate().map(|(k, v)| v - (k + 1) as f64).collect();
        close(ours, &less, 1e-6);
    }
}

#[test]
fn power_zero_is_the_logarithm_and_power_one_no_transform() {
    let log = fitted(passengers(), TransformRequest::Log);
    let zero = fitted(passengers(), TransformRequest::BoxCox(Some(0.0)));
    assert_eq!(values(&log), values(&zero));
    let (a, b) = (zero.components(0.9).unwrap(), log.components(0.9).unwrap());
    close(&a.level.unwrap().value, &b.level.unwrap().value, 1e-14);
    // On this scale the parts add up, where those of the logarithm multiply.
    let logs: Vec<f64> = b.seasonal.unwrap().value.iter().map(|v| v.ln()).collect();
    close(&a.seasonal.unwrap().value, &logs, 1e-12);
    assert_eq!(zero.forecast(STEPS, 0.9).unwrap().total_upper, log.forecast(STEPS, 0.9).unwrap().total_upper);

    let plain = fitted(passengers(), TransformRequest::None);
    let one = fitted(passengers(), TransformRequest::BoxCox(Some(1.0)));
    close(&values(&one), &values(&plain), 1e-6);
    let (a, b) = (one.forecast(STEPS, 0.9).unwrap(), plain.forecast(STEPS, 0.9).unwrap());
    for (ours, other) in [
        (&a.expected, &b.expected),
        (&a.std_error, &b.std_error),
        (&a.lower, &b.lower),
        (&a.total_expected, &b.total_expected),
        (&a.total_lower, &b.total_lower),
        (&a.total_upper, &b.total_upper),
    ] {
        close(ours, other, 1e-6);
    }
}

/// `x ~ N(m, v)`, `y = (1 + x/2)^2`: mean `w^2 + v/4`, variance `w^2 v + v^2/8` with `w = 1 + m/2`.
#[test]
fn power_one_half_has_its_moments_in_closed_form() {
    let half = fitted(passengers(), TransformRequest::BoxCox(Some(0.5)));
    let ours = half.forecast(STEPS, 0.9).unwrap();
    let transformed: Vec<f64> = passengers().iter().map(|v| 2.0 * (v.sqrt() - 1.0)).collect();
    let model = fitted(transformed, TransformRequest::None).forecast(STEPS, 0.9).unwrap();
    for step in 0..STEPS {
        let (w, v) = (1.0 + 0.5 * model.expected[step], model.std_error[step].powi(2));
        let mean = w * w + 0.25 * v;
        assert!((ours.expected[step] / mean - 1.0).abs() < 1e-6);
        let sd = (w * w * v + v * v / 8.0).sqrt();
        assert!((ours.std_error[step] / sd - 1.0).abs() < 1e-6);
        let end = |x: f64| (1.0 + 0.5 * x).powi(2);
        assert!((ours.lower[step] / end(model.lower[step]) - 1.0).abs() < 1e-6);
        assert!((ours.upper[step] / end(model.upper[step]) - 1.0).abs() < 1e-6);
    }
}

/// Totals against paths drawn from the joint law of the steps, which `dense.rs` has from matrices.
#[test]
fn totals_hold_what_they_claim_when_paths_are_drawn() {
    const DRAWS: usize = 40_000;
    let power = 0.3;
    let fit = fitted(passengers(), TransformRequest::BoxCox(Some(power)));
    let ours = fit.forecast(STEPS, 0.9).unwrap();
    let series = Series {
        observed: passengers().iter().map(|v| (v.powf(power) - 1.0) / power).collect(),
        ..Series::default()
    };
    let (mean, covariance) = future(fit.structure(), &values(&fit), &series, STEPS);
    let root = covariance.cholesky().expect("positive definite").l();
    let mut rng = ChaCha8Rng::seed_from_u64(11);
    let (mut sums, mut below, mut above) = ([0.0; STEPS], [0.0; STEPS], [0.0; STEPS]);
    for _ in 0..DRAWS {
        let noise: DVector<f64> = DVector::from_fn(STEPS, |_, _| StandardNormal.sample(&mut rng));
        let path = &mean + &root * noise;
        let mut total = 0.0;
        for step in 0..STEPS {
            total += (1.0 + power * path[step]).max(0.0).powf(1.0 / power);
            sums[step] += total;
            below[step] += f64::from(u8::from(total < ours.total_lower[step]));
            above[step] += f64::from(u8::from(total > ours.total_upper[step]));
        }
    }
    let draws = DRAWS as f64;
    for step in 0..STEPS {
        assert!((sums[step] / draws / ours.total_expected[step] - 1.0).abs() < 2e-3, "step {step}");
        // 5 % on each side; the standard deviation of a share is 0.1 %, the law of the total is approximate.
        assert!((below[step] / draws - 0.05).abs() < 0.006, "step {step}: {}", below[step] / draws);
        assert!((above[step] / draws - 0.05).abs() < 0.006, "step {step}: {}", above[step] / draws);
    }
}

/// With a fixed level and white noise the likelihood of n - 1 contrasts has the maximum of the plain one. Powers by
/// scipy 1.17.1: the maximum of `scipy.stats.boxcox_llf` to 1e-10.
#[test]
fn the_power_is_that_of_a_general_library() {
    let airline: Vec<f64> = column("airpassengers_ln", "y").iter().map(|v| v.exp().round()).collect();
    for (observed, power) in [(airline, 0.148_022_585_9), (column("nile", "y"), 0.370_252_325_5)] {
        let request = Request { transform: TransformRequest::BoxCox(None), ..plain(Trend::FixedLevel) };
        let series = Series { observed, ..Series::default() };
        let fit = fit(&series, &request, &mut Workspace::new()).expect("a fit");
        let Transform::BoxCox(ours) = fit.transform() else { panic!("another transform") };
        assert!((ours - power).abs() < 5e-3, "{ours} {power}");
    }
}

#[test]
fn an_estimated_power_is_one_that_can_be_named() {
    let open = fitted(passengers(), TransformRequest::BoxCox(None));
    let power = open.transform().power().expect("a power");
    let named = fitted(passengers(), TransformRequest::BoxCox(Some(power)));
    assert_eq!(values(&open), values(&named));
    assert_eq!(open.forecast(STEPS, 0.9), named.forecast(STEPS, 0.9));
    // The power counts as an estimated parameter.
    assert_eq!(open.diagnostics().estimated, named.diagnostics().estimated + 1);
}

#[test]
fn values_that_a_transform_does_not_take_are_named() {
    for (transform, value) in [
        (TransformRequest::Log1p, -1.0),
        (TransformRequest::BoxCox(Some(0.5)), -0.25),
        (TransformRequest::BoxCox(Some(0.0)), 0.0),
        (TransformRequest::BoxCox(None), 0.0),
    ] {
        let mut observed = passengers();
        observed[7] = value;
        let request = Request { transform, ..plain(Trend::LocalLevel) };
        let series = Series { observed, ..Series::default() };
        let trouble = fit(&series, &request, &mut Workspace::new()).expect_err("no transform");
        assert!(
            matches!(trouble, Trouble::NotPositive { index: 7, value: v, .. } if v == value),
            "{trouble}"
        );
    }
    // Zero is a value of the square root.
    let mut observed = passengers();
    observed[7] = 0.0;
    assert!(fitted(observed, TransformRequest::BoxCox(Some(0.5))).forecast(3, 0.9).is_ok());
}
