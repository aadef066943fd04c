//! Estimates that belong at the end of their range stand there exactly, and are found without creeping.

#[path = "support/plain.rs"]
mod plain;

use plain::plain;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{Fit, Request, SeasonRequest, Series, Workspace, fit};

/// A straight line with white noise: nothing drifts, the slope is not damped.
fn line(seed: u64, points: usize, slope: f64) -> Vec<f64> {
    let mut draws = ChaCha8Rng::seed_from_u64(seed);
    (0..points)
        .map(|t| {
            let noise: f64 = StandardNormal.sample(&mut draws);
            100.0 + slope * t as f64 + noise
        })
        .collect()
}

fn fitted(observed: Vec<f64>, trend: Trend) -> Fit {
    let series = Series { observed, ..Series::default() };
    fit(&series, &plain(trend), &mut Workspace::new()).expect("a fit")
}

fn value(fit: &Fit, name: &str) -> f64 {
    fit.parameters().iter().find(|p| p.name == name).expect("the parameter").value
}

#[test]
fn a_straight_series_drifts_by_exactly_nothing() {
    let mut exact = 0;
    for seed in 0..40 {
        let fit = fitted(line(seed, 120, 1.0), Trend::LocalLinear);
        assert!(fit.converged(), "seed {seed}");
        for name in ["level", "slope"] {
            let variance = value(&fit, name);
            exact += usize::from(variance == 0.0);
            // Where chance gives the estimate some drift it is a real one, not a creeping rest.
            assert!(variance == 0.0 || variance > 1e-9, "seed {seed}: {name} = {variance:e}");
        }
    }
    // Half of the estimates of a zero variance are zero in large samples (Self & Liang 1987, JASA 82).
    assert!(exact >= 40, "{exact} of 80 variances are zero");
}

#[test]
fn a_slope_that_is_not_damped_stops_at_the_end_of_the_range() {
    let mut at_end = 0;
    for seed in 0..40 {
        for slope in [0.3, 1.0, 10.0] {
            let fit = fitted(line(seed, 120, slope), Trend::Damped);
            assert!(fit.converged(), "seed {seed}");
            // Without an end of the range such a climb creeps: it took 50 to 80 evaluations.
            assert!(fit.evaluations() <= 50, "seed {seed}: {} evaluations", fit.evaluations());
            let level = value(&fit, "level");
            assert!(level == 0.0 || level > 1e-9, "seed {seed}: level = {level:e}");
            at_end += usize::from(value(&fit, "slope_damping") == 0.9999);
        }
    }
    // The slope never leaves its value, so that only chance could make a smaller damping likelier.
    assert!(at_end >= 110, "{at_end} of 120 dampings are at the end of their range");
}

/// Short series whose autoregression takes up all the noise: the climb creeps along a ridge on which the irregular falls only together with
/// the coefficients. The numbers are those of `sales.inc` (invented): remainders of quadratics.
#[test]
fn an_irregular_that_an_autoregression_takes_up_is_exactly_zero() {
    let mut wandered = 0.0;
    let observed: Vec<f64> = (0..58_i64)
        .map(|w| {
            let remainder = |a: i64, b: i64, m: i64| ((w * w * a + w * b) % m) as f64;
            wandered += (remainder(53, 29, 199) - 99.0) / 66.0;
            let price = 2.0 + remainder(11, 7, 13) / 20.0;
            let promotion = f64::from(u8::from(w * 5 % 9 == 0));
            let pattern = [9.0, -3.0, -11.0, 5.0][(w % 4) as usize];
            let wobble = (remainder(37, 19, 211) - 105.0) / 52.5;
            let sum =
                100.0 + 0.4 * w as f64 + wandered + pattern - 12.0 * (price - 2.0) + 8.0 * promotion + wobble;
            (sum * 100.0).round() / 100.0
        })
        .collect();
    let series = Series { observed, ..Series::default() };
    let open =
        Request { season: SeasonRequest::Given(vec![4.0]), autoregression: 2, ..plain(Trend::FixedLine) };
    let without = Request { known: vec![("irregular".to_owned(), 0.0)], ..open.clone() };
    let mut workspace = Workspace::new();
    let ours = fit(&series, &open, &mut workspace).expect("a fit");
    let nested = fit(&series, &without, &mut workspace).expect("a fit");
    let (a, b) = (ours.diagnostics().log_likelihood, nested.diagnostics().log_likelihood);
    assert!(ours.converged() && a >= b - 1e-6, "{a} {b}");
    assert_eq!(value(&ours, "irregular"), 0.0);
}
