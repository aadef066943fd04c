//! Estimates that belong at the end of their range stand there exactly, and are found without creeping.

#[path = "support/plain.rs"]
mod plain;

use plain::plain;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{Fit, Series, Workspace, fit};

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
