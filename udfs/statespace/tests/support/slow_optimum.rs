//! The highest likelihood of a model on a series by brute patience: many random starts, each climbed for long, and every variance tried at
//! zero. Nothing of the estimation under test is used, only the likelihood with its score.

use nalgebra::{DMatrix, DVector};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use stillwell_statespace::structure::{Link, Structure};
use stillwell_statespace::{Likelihood, Series};

/// The best log-likelihood found from `starts` random starts.
pub(crate) fn slow_optimum(structure: &Structure, series: &Series, starts: usize, seed: u64) -> f64 {
    let model = structure.model();
    let links: Vec<Link> = model.parameters().iter().map(|p| p.link).collect();
    let mut likelihood = Likelihood::new(model, series.clone());
    let mut draws = ChaCha8Rng::seed_from_u64(seed);
    let scale = variance_of_differences(&series.observed);
    let mut best = f64::NEG_INFINITY;
    for start in 0..starts {
        let values: Vec<f64> = links
            .iter()
            .map(|link| match *link {
                Link::Variance if start > 0 && draws.random_bool(0.2) => 0.0,
                Link::Variance => scale * 10.0_f64.powf(draws.random_range(-5.0..0.3)),
                Link::Between { high, .. } if draws.random_bool(0.2) => high,
                Link::Between { low, high } => low + (high - low) * draws.random_range(0.02..0.98),
                Link::Free => draws.random_range(-0.5..0.5),
            })
            .collect();
        best = best.max(climb(&mut likelihood, &links, values));
    }
    best
}

/// One long climb; between its legs each parameter is tried at its limits, and those at a limit are set free again.
fn climb(likelihood: &mut Likelihood, links: &[Link], mut values: Vec<f64>) -> f64 {
    let mut best = leg(likelihood, links, &mut values);
    for _ in 0..6 {
        let before = best;
        for i in 0..links.len() {
            let others: Vec<f64> = match links[i] {
                Link::Variance if values[i] > 0.0 => vec![0.0],
                Link::Variance => {
                    let largest = (0..links.len())
                        .filter(|&j| links[j] == Link::Variance)
                        .fold(0.0_f64, |a, j| a.max(values[j]));
                    vec![1e-2 * largest, 1e-4 * largest]
                }
                Link::Between { low, high } if values[i] == high => vec![low + 0.9 * (high - low)],
                Link::Between { high, .. } => vec![high],
                Link::Free => Vec::new(),
            };
            for other in others {
                let mut trial = values.clone();
                trial[i] = other;
                let reached = leg(likelihood, links, &mut trial);
                if reached > best {
                    best = reached;
                    values = trial;
                }
            }
        }
        if best - before < 1e-9 {
            break;
        }
    }
    best
}

/// Damped scoring in logarithms and logits of the parameters that are not at a limit, until nothing is gained any more.
fn leg(likelihood: &mut Likelihood, links: &[Link], values: &mut Vec<f64>) -> f64 {
    let p = links.len();
    let inside = |i: usize, v: f64| match links[i] {
        Link::Variance => v > 0.0,
        Link::Between { low, high } => v > low && v < high,
        Link::Free => true,
    };
    let moving: Vec<usize> = (0..p).filter(|&i| inside(i, values[i])).collect();
    let mut read = |at: &[f64]| {
        likelihood
            .with_score(at)
            .ok()
            .filter(|a| a.0.is_finite())
            .map(|(l, g, h)| (l, g.to_vec(), h.to_vec()))
    };
    let Some(mut here) = read(values) else { return f64::NEG_INFINITY };
    let (mut lambda, mut idle) = (1e-2, 0);
    for _ in 0..150 {
        let slope = |i: usize| match links[i] {
            Link::Variance => values[i],
            Link::Between { low, high } => (values[i] - low) * (high - values[i]) / (high - low),
            Link::Free => 1.0,
        };
        let g = DVector::from_fn(moving.len(), |a, _| here.1[moving[a]] * slope(moving[a]));
        let mut h = DMatrix::from_fn(moving.len(), moving.len(), |a, b| {
            here.2[moving[a] * p + moving[b]] * slope(moving[a]) * slope(moving[b])
        });
        for a in 0..moving.len() {
            h[(a, a)] += lambda * h[(a, a)] + 1e-10;
        }
        let Some(factor) = h.cholesky() else {
            lambda = (lambda * 10.0).max(1e-3);
            continue;
        };
        let step = factor.solve(&g).map(|x| x.clamp(-2.0, 2.0));
        let mut trial = values.clone();
        for (a, &i) in moving.iter().enumerate() {
            trial[i] = match links[i] {
                Link::Variance => values[i] * step[a].exp(),
                Link::Between { low, high } => {
                    let odds = (values[i] - low) / (high - values[i]) * step[a].exp();
                    low + (high - low) * (odds / (1.0 + odds)).min(1.0 - 1e-12)
                }
                Link::Free => values[i] + step[a],
            };
        }
        match read(&trial) {
            Some(there) if there.0 >= here.0 => {
                idle = if there.0 - here.0 < 1e-10 { idle + 1 } else { 0 };
                (here, *values) = (there, trial);
                lambda = (lambda * 0.2).max(1e-9);
            }
            _ => {
                idle += 1;
                lambda *= 10.0;
            }
        }
        if idle > 3 {
            break;
        }
    }
    here.0
}

fn variance_of_differences(observed: &[f64]) -> f64 {
    let squares: Vec<f64> =
        observed.windows(2).map(|w| (w[1] - w[0]).powi(2)).filter(|v| v.is_finite()).collect();
    (squares.iter().sum::<f64>() / squares.len().max(1) as f64).max(1e-12)
}
