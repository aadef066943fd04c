//! How often the test finds a season where there is one and where there is none.

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

use super::*;

/// Level that wanders, noise, and a season of this amplitude; the noise has variance 1.
fn series(rng: &mut ChaCha8Rng, n: usize, period: f64, amplitude: f64, wander: f64) -> Vec<f64> {
    let mut normal = || -> f64 { StandardNormal.sample(rng) };
    let mut level = 0.0;
    (0..n)
        .map(|t| {
            level += wander * normal();
            let turn = std::f64::consts::TAU * t as f64 / period;
            level + amplitude * turn.cos() + 0.4 * amplitude * (2.0 * turn).sin() + normal()
        })
        .collect()
}

fn share(n: usize, period: f64, amplitude: f64, wander: f64) -> f64 {
    let mut rng = ChaCha8Rng::seed_from_u64(11);
    let found =
        (0..400).filter(|_| season_speaks(&series(&mut rng, n, period, amplitude, wander), period)).count();
    found as f64 / 400.0
}

#[test]
fn without_a_season_none_is_found_but_for_the_level_of_the_test() {
    // Nominal 5 %; a wandering level and short series may take it to a tenth.
    for (n, period) in [(60, 12.0), (120, 12.0), (24, 4.0), (60, 4.0), (208, 52.18), (365, 7.0)] {
        for wander in [0.0, 0.3, 1.0] {
            let share = share(n, period, 0.0, wander);
            assert!(share <= 0.10, "n {n}, period {period}, wander {wander}: found in {share}");
        }
    }
}

#[test]
fn a_clear_season_is_found() {
    for (n, period, wander) in [(60, 12.0, 0.3), (40, 4.0, 0.3), (208, 52.18, 0.2), (120, 7.0, 0.3)] {
        let share = share(n, period, 2.0, wander);
        assert!(share >= 0.9, "n {n}, period {period}: found in {share}");
    }
}

#[test]
fn gaps_do_not_make_a_season() {
    let mut rng = ChaCha8Rng::seed_from_u64(3);
    let found = (0..200)
        .filter(|_| {
            let mut values = series(&mut rng, 120, 12.0, 0.0, 0.3);
            for t in (5..120).step_by(12) {
                values[t] = f64::NAN;
            }
            season_speaks(&values, 12.0)
        })
        .count();
    assert!(found <= 24, "{found} of 200");
}

#[test]
fn working_days_ask_for_no_weekly_season() {
    let mut rng = ChaCha8Rng::seed_from_u64(9);
    let mut values = series(&mut rng, 365, 7.0, 2.0, 0.1);
    assert!(season_speaks(&values, 7.0));
    for (t, v) in values.iter_mut().enumerate() {
        if t % 7 >= 5 {
            *v = f64::NAN;
        }
    }
    assert!(!season_speaks(&values, 7.0));
}

#[test]
fn each_of_two_patterns_is_found_and_none_that_the_first_one_makes() {
    let mut rng = ChaCha8Rng::seed_from_u64(21);
    // Hourly for four weeks; daily for four years.
    for (n, short, long) in [(672, 24.0, 168.0), (1461, 7.0, 365.25)] {
        let (mut both, mut one) = (0, 0);
        for _ in 0..40 {
            let daily = series(&mut rng, n, short, 2.0, 0.1);
            let weekly: Vec<f64> = daily
                .iter()
                .enumerate()
                .map(|(t, v)| v + 1.5 * (std::f64::consts::TAU * t as f64 / long).sin())
                .collect();
            both += usize::from(speaking(&weekly, &[short, long]) == [short, long]);
            one += usize::from(speaking(&daily, &[short, long]) == [short]);
        }
        assert!(both >= 36, "{short} and {long}: found both in {both} of 40");
        // The level of the test is 5 %.
        assert!(one >= 34, "{short} alone: found in {one} of 40");
    }
}
