//! The log transform: the same model as on logged data, taken back to the data's scale exactly; and what adds up without it
//! multiplies up with it.

#[path = "support/dense.rs"]
mod dense;
#[path = "support/plain.rs"]
mod plain;
#[path = "support/series.rs"]
mod series;

use dense::future;
use nalgebra::{DMatrix, DVector};
use plain::plain;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use series::column;
use stillwell_statespace::quantile::normal_quantile;
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{
    Fit, Request, SeasonRequest, Series, Transform, TransformRequest, Workspace, fit,
};

const STEPS: usize = 12;
const COVERAGE: f64 = 0.9;
/// Relative; sums and exponentials of a dozen numbers.
const ROUNDING: f64 = 1e-12;

/// Airline passengers with gaps, a price that drifts in its effect and a promotion with a constant one.
fn passengers() -> Series {
    let mut observed: Vec<f64> = column("airpassengers_ln", "y").iter().map(|v| v.exp().round()).collect();
    let points = observed.len() + STEPS;
    for t in [0, 13, 50, 51, 52, 120] {
        observed[t] = f64::NAN;
    }
    let promotion: Vec<f64> = (0..points).map(|t| f64::from(u8::from(t % 9 == 4))).collect();
    for (y, x) in observed.iter_mut().zip(&promotion) {
        *y *= (0.1 * x).exp();
    }
    let price = (0..points).map(|t| 1.0 + 0.3 * (t as f64 * 0.7).sin()).collect();
    Series { observed, drivers: vec![promotion], drifting_drivers: vec![price] }
}

fn request(transform: TransformRequest) -> Request {
    Request {
        season: SeasonRequest::Given(vec![12.0]),
        transform,
        drivers: vec!["promotion".to_owned()],
        drifting_drivers: vec!["price".to_owned()],
        ..plain(Trend::LocalLinear)
    }
}

fn logged(series: &Series) -> Series {
    Series { observed: series.observed.iter().map(|v| v.ln()).collect(), ..series.clone() }
}

/// The fit with the transform, and the one of the logged data without.
fn both() -> (Fit, Fit) {
    let series = passengers();
    let mut workspace = Workspace::new();
    let multiplied = fit(&series, &request(TransformRequest::Log), &mut workspace).expect("a fit");
    let added = fit(&logged(&series), &request(TransformRequest::None), &mut workspace).expect("a fit");
    (multiplied, added)
}

#[track_caller]
fn close(ours: f64, expected: f64, tolerance: f64) {
    assert!((ours - expected).abs() <= tolerance * (1.0 + expected.abs()), "{ours} {expected}");
}

#[test]
fn the_model_is_that_of_the_logged_data() {
    let (multiplied, added) = both();
    assert!(multiplied.transform() == Transform::Log && added.transform() == Transform::None);
    for (a, b) in multiplied.parameters().iter().zip(added.parameters()) {
        assert_eq!((&a.name, a.value, a.known), (&b.name, b.value, b.known));
    }
    let (a, b) = (multiplied.diagnostics(), added.diagnostics());
    assert_eq!(
        (a.log_likelihood, a.aic, a.q, a.h, a.normality),
        (b.log_likelihood, b.aic, b.q, b.h, b.normality)
    );
    assert_eq!((a.r_squared, a.r_squared_season), (b.r_squared, b.r_squared_season));
    assert_eq!(multiplied.coefficients(), added.coefficients());
    let (a, b) = (multiplied.components(COVERAGE).expect("one"), added.components(COVERAGE).expect("two"));
    // t-values have no scale.
    for (a, b) in [(a.outlier_t, b.outlier_t), (a.shift_t, b.shift_t)] {
        assert!(a.iter().zip(&b).all(|(a, b)| a == b || (a.is_nan() && b.is_nan())));
    }
}

#[test]
fn forecasts_are_taken_back_exactly() {
    let (multiplied, added) = both();
    let z = normal_quantile(0.5 + 0.5 * COVERAGE);
    let ours = multiplied.forecast(STEPS, COVERAGE).expect("a forecast");
    let model = added.forecast(STEPS, COVERAGE).expect("a forecast");
    for step in 0..STEPS {
        let (m, s) = (model.expected[step], model.std_error[step]);
        // x ~ N(m, s^2): exp x has mean exp(m + s^2/2), variance mean^2 (exp(s^2) - 1) and the quantiles exp(m + z s).
        let mean = (m + 0.5 * s * s).exp();
        close(ours.expected[step], mean, ROUNDING);
        close(ours.std_error[step], mean * ((s * s).exp() - 1.0).sqrt(), 1e-10);
        close(ours.lower[step], (m - z * s).exp(), ROUNDING);
        close(ours.upper[step], (m + z * s).exp(), ROUNDING);
        close(ours.lower[step], model.lower[step].exp(), ROUNDING);
    }
}

/// Expected totals and their intervals from the joint normal law of the logarithms.
fn lognormal_totals(mean: &DVector<f64>, covariance: &DMatrix<f64>) -> Vec<[f64; 3]> {
    let z = normal_quantile(0.5 + 0.5 * COVERAGE);
    // E exp(x_i) exp(x_j) = E exp(x_i) E exp(x_j) exp(c_ij).
    let expected: Vec<f64> = (0..mean.len()).map(|i| (mean[i] + 0.5 * covariance[(i, i)]).exp()).collect();
    (0..mean.len())
        .map(|step| {
            let total: f64 = expected[..=step].iter().sum();
            let mut variance = 0.0;
            for i in 0..=step {
                for j in 0..=step {
                    variance += expected[i] * expected[j] * (covariance[(i, j)].exp() - 1.0);
                }
            }
            // The interval is that of the lognormal with these moments (Fenton 1960).
            let v = (1.0 + variance / (total * total)).ln();
            let m = total.ln() - 0.5 * v;
            [total, (m - z * v.sqrt()).exp(), (m + z * v.sqrt()).exp()]
        })
        .collect()
}

#[test]
fn totals_of_drivers_alone_share_their_coefficients() {
    // No trend and no season: the steps depend on each other through the coefficients only.
    let wave =
        |phase: f64| (0..40 + STEPS).map(|t| 1.0 + (t as f64 * 0.9 + phase).sin()).collect::<Vec<f64>>();
    let (a, b) = (wave(0.0), wave(1.3));
    let observed = (0..40).map(|t| (0.8 * a[t] + 0.5 * b[t] + 0.3 * (t as f64 * 2.3).cos()).exp()).collect();
    let series = Series { observed, drivers: vec![a, b], drifting_drivers: Vec::new() };
    let request = Request {
        drivers: vec!["a".to_owned(), "b".to_owned()],
        transform: TransformRequest::Log,
        ..plain(Trend::None)
    };
    let fit = fit(&series, &request, &mut Workspace::new()).expect("a fit");
    let ours = fit.forecast(STEPS, COVERAGE).expect("a forecast");
    let values: Vec<f64> = fit.parameters().iter().map(|p| p.value).collect();
    let (mean, covariance) = future(fit.structure(), &values, &logged(&series), STEPS);
    assert!(covariance[(0, 5)].abs() > 1e-4, "steps are correlated");
    for (step, [total, lower, upper]) in lognormal_totals(&mean, &covariance).into_iter().enumerate() {
        close(ours.total_expected[step], total, 1e-9);
        close(ours.total_lower[step], lower, 1e-9);
        close(ours.total_upper[step], upper, 1e-9);
    }
}

#[test]
fn totals_have_the_moments_of_a_sum_of_lognormals() {
    let (multiplied, _) = both();
    let ours = multiplied.forecast(STEPS, COVERAGE).expect("a forecast");
    let values: Vec<f64> = multiplied.parameters().iter().map(|p| p.value).collect();
    let (mean, covariance) = future(multiplied.structure(), &values, &logged(&passengers()), STEPS);
    for (step, [total, lower, upper]) in lognormal_totals(&mean, &covariance).into_iter().enumerate() {
        close(ours.total_expected[step], total, 1e-9);
        close(ours.total_lower[step], lower, 1e-9);
        close(ours.total_upper[step], upper, 1e-9);
    }
    // At the first step that is no approximation.
    close(ours.total_lower[0], ours.lower[0], 1e-10);
    close(ours.total_upper[0], ours.upper[0], 1e-10);
    assert_eq!(ours.total_expected[0], ours.expected[0]);

    // And it holds what it claims when the sums are drawn.
    const DRAWS: usize = 40_000;
    let root = covariance.cholesky().expect("positive definite").l();
    let mut rng = ChaCha8Rng::seed_from_u64(7);
    let mut below = [0.0; STEPS];
    let mut above = [0.0; STEPS];
    let mut sums = [0.0; STEPS];
    for _ in 0..DRAWS {
        let noise: DVector<f64> = DVector::from_fn(STEPS, |_, _| StandardNormal.sample(&mut rng));
        let path = &mean + &root * noise;
        let mut total = 0.0;
        for step in 0..STEPS {
            total += path[step].exp();
            sums[step] += total;
            below[step] += f64::from(u8::from(total < ours.total_lower[step]));
            above[step] += f64::from(u8::from(total > ours.total_upper[step]));
        }
    }
    let draws = DRAWS as f64;
    for step in 0..STEPS {
        let width = ours.total_upper[step] - ours.total_lower[step];
        // Standard error of a mean of 40,000 draws: a five-hundredth of the interval's width at most.
        assert!((sums[step] / draws - ours.total_expected[step]).abs() < width / 120.0);
        // 5 % each side; binomial standard error 0.11 %, the rest for the approximation.
        for share in [below[step] / draws, above[step] / draws] {
            assert!((share - 0.05).abs() < 0.006, "step {step}: {share} outside");
        }
    }
}

#[test]
fn components_multiply_up() {
    let series = passengers();
    let (multiplied, added) = both();
    let n = series.observed.len();
    let (ours, model) =
        (multiplied.components(COVERAGE).expect("ours"), added.components(COVERAGE).expect("the model's"));
    let (level, slope) = (ours.level.expect("a level"), ours.slope.expect("a slope"));
    let seasonal = ours.seasonal.expect("a season");
    let (model_level, model_slope) = (model.level.expect("a level"), model.slope.expect("a slope"));
    assert_eq!(ours.effects.len(), 2);
    for t in 0..n {
        let product =
            level.value[t] * seasonal.value[t] * ours.effects.iter().map(|e| e.value[t]).product::<f64>();
        close(product, ours.fitted[t], 1e-10);
        close(ours.fitted[t], model.fitted[t].exp(), ROUNDING);
        close(ours.lower[t], model.lower[t].exp(), ROUNDING);
        close(ours.upper[t], model.upper[t].exp(), ROUNDING);
        close(level.value[t], model_level.value[t].exp(), ROUNDING);
        // First order: the derivative of exp times the standard error.
        close(level.std_error[t], level.value[t] * model_level.std_error[t], ROUNDING);
        // Growth per step: 0.01 = 1 %.
        close(slope.value[t], model_slope.value[t].exp() - 1.0, ROUNDING);
        let y = series.observed[t];
        if y.is_nan() {
            assert!(ours.irregular[t].is_nan(), "irregular {} where nothing is observed", ours.irregular[t]);
        } else {
            close(ours.fitted[t] * ours.irregular[t], y, ROUNDING);
        }
    }
    // The promotion multiplies by exp of its coefficient, and by 1 where there is none.
    let coefficient = multiplied.coefficients()[0].0;
    for t in 0..n {
        close(ours.effects[0].value[t], (coefficient * series.drivers[0][t]).exp(), ROUNDING);
    }
    // The planted 10 % (in logs) comes back.
    assert!((coefficient - 0.1).abs() < 0.02, "{coefficient}");
}

#[test]
fn components_add_up() {
    let series = logged(&passengers());
    let (_, added) = both();
    let ours = added.components(COVERAGE).expect("components");
    let z = normal_quantile(0.5 + 0.5 * COVERAGE);
    for t in 0..series.observed.len() {
        let parts = ours.level.iter().chain(&ours.seasonal).chain(&ours.effects);
        close(parts.map(|s| s.value[t]).sum::<f64>(), ours.fitted[t], 1e-10);
        close(ours.fitted[t] - ours.lower[t], ours.upper[t] - ours.fitted[t], 1e-10);
        assert!(ours.upper[t] - ours.lower[t] > 2.0 * z * 1e-9);
        let y = series.observed[t];
        if y.is_nan() {
            assert!(ours.irregular[t].is_nan());
        } else {
            close(ours.fitted[t] + ours.irregular[t], y, ROUNDING);
        }
    }
}

#[test]
fn parts_of_a_forecast_multiply_up_to_its_median() {
    let (multiplied, added) = both();
    let (ours, model) = (
        multiplied.forecast(STEPS, COVERAGE).expect("ours"),
        added.forecast(STEPS, COVERAGE).expect("the model's"),
    );
    for step in 0..STEPS {
        let parts = ours.parts.level.iter().chain(&ours.parts.seasonal).chain(&ours.parts.effects);
        close(parts.map(|s| s.value[step]).product::<f64>(), model.expected[step].exp(), 1e-10);
    }
}
