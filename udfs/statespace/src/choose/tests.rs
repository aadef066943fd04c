//! The rules fire where they should and not where they should not, and choose what can be named.

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

use super::*;

#[test]
fn a_spread_that_grows_with_the_level_asks_for_the_logarithm() {
    let mut rng = ChaCha8Rng::seed_from_u64(5);
    let mut normal = || -> f64 { StandardNormal.sample(&mut rng) };
    let growing: Vec<f64> = (0..120).map(|t| (0.02 * f64::from(t) + 0.1 * normal()).exp() * 50.0).collect();
    assert!(spread_follows_level(&growing, Some(12.0)));
    let even: Vec<f64> = (0..120).map(|t| 500.0 + f64::from(t) + 10.0 * normal()).collect();
    assert!(!spread_follows_level(&even, Some(12.0)));
    let with_zero: Vec<f64> =
        growing.iter().enumerate().map(|(t, v)| if t == 7 { 0.0 } else { *v }).collect();
    assert!(!spread_follows_level(&with_zero, Some(12.0)));
}

#[test]
fn every_default_can_be_named() {
    let request = Request { season: SeasonRequest::Auto(vec![12.0]), ..Request::default() };
    let short: Vec<f64> = (0..10).map(|t| f64::from(t % 3)).collect();
    let choice = choose(&request, &short).unwrap();
    assert_eq!((choice.structure.trend, choice.transform), (Trend::LocalLevel, Transform::None));
    let long: Vec<f64> = (0..40).map(|t| f64::from(t % 12) + 0.1 * f64::from((t * 7) % 5) - 2.0).collect();
    let choice = choose(&request, &long).unwrap();
    assert_eq!(choice.structure.trend, Trend::Damped);
    assert_eq!(choice.structure.seasons, vec![Season { period: 12.0, harmonics: None, fixed: false }]);
    assert_eq!(
        (default_harmonics(24.0), default_harmonics(52.18), default_harmonics(7.0)),
        (Some(6), Some(3), None)
    );
}
