//! The likelihood of the differences against the exact one of the kernel, which shares no code with it.

use super::*;
use crate::instructions::Instructions;
use crate::request::Series;
use crate::structure::{Structure, Trend};

/// A wandering series without a generator: sums of incommensurable waves.
fn series(n: u32) -> Vec<f64> {
    (0..n)
        .map(f64::from)
        .map(|t| 0.05 * t + (0.37 * t).sin() + 0.7 * (1.93 * t).cos() + (0.011 * t * t).sin())
        .collect()
}

/// Where nothing is left out the two differ by a constant: gaps between points are the same, and so are scores.
#[test]
fn a_trend_has_its_exact_likelihood_up_to_a_constant() {
    let points: [(Trend, [Vec<f64>; 2]); 3] = [
        (Trend::LocalLevel, [vec![1.0, 0.3], vec![0.2, 0.9]]),
        (Trend::LocalLinear, [vec![1.0, 0.3, 0.02], vec![0.5, 0.0, 0.1]]),
        (Trend::Damped, [vec![1.0, 0.3, 0.02, 0.8], vec![0.5, 0.1, 0.1, 0.95]]),
    ];
    for (trend, [a, b]) in points {
        let model = Structure { trend, ..Structure::default() }.model();
        let observed = series(61);
        let mut spectrum = Spectrum::new(&model, &observed, Instructions::widest()).unwrap();
        assert!(spectrum.exact, "{trend:?}");
        let mut exact = crate::Likelihood::new(model, Series { observed, ..Series::default() });
        let mut at = |values: &[f64]| {
            let answer = spectrum.answer(Question { values, derivatives: true });
            let (near, score) = (answer.log_likelihood, answer.gradient.to_vec());
            let (value, gradient, _) = exact.with_score(values).unwrap();
            for (i, (s, g)) in score.iter().zip(gradient).enumerate() {
                assert!((s - g).abs() < 1e-7 * (1.0 + g.abs()), "{trend:?}, parameter {i}: {s} and {g}");
            }
            value - near
        };
        let (first, second) = (at(&a), at(&b));
        assert!((first - second).abs() < 1e-8, "{trend:?}: {first} and {second}");
    }
}
