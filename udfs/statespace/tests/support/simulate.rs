//! Draws series from a structure's own equations.

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use stillwell_statespace::Series;
use stillwell_statespace::structure::Structure;

/// A series of `n` points of `structure` at `values`; diffuse states start at draws of size `start`.
/// `drifting`: values of the drifting drivers.
pub(crate) fn simulate(
    structure: &Structure,
    values: &[f64],
    n: usize,
    start: f64,
    drifting: Vec<Vec<f64>>,
    seed: u64,
) -> Series {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let mut normal = || -> f64 { StandardNormal.sample(&mut rng) };
    let system = structure.model().system_at(values).expect("a stationary system");
    let mut state = vec![0.0; system.states];
    for &i in &system.diffuse {
        state[i] = start * normal();
    }
    for block in &system.proper {
        // Cholesky factor of a small covariance, written out.
        let k = block.size;
        let mut l = vec![0.0; k * k];
        for i in 0..k {
            for j in 0..=i {
                let dot: f64 = (0..j).map(|c| l[i * k + c] * l[j * k + c]).sum();
                let rest = block.covariance[i * k + j] - dot;
                l[i * k + j] = if i == j { rest.max(0.0).sqrt() } else { rest / l[j * k + j] };
            }
        }
        let draws: Vec<f64> = (0..k).map(|_| normal()).collect();
        for i in 0..k {
            state[block.offset + i] = (0..=i).map(|j| l[i * k + j] * draws[j]).sum();
        }
    }
    let mut observed = Vec::with_capacity(n);
    for t in 0..n {
        let mut y = system.h.sqrt() * normal();
        y += system.fixed_loads.iter().map(|&(i, z)| z * state[i]).sum::<f64>();
        y += system.driver_loads.iter().map(|&(i, d)| drifting[d][t] * state[i]).sum::<f64>();
        observed.push(y);
        system.forward(&mut state, 1);
        for (a, q) in state.iter_mut().zip(&system.q) {
            *a += q.sqrt() * normal();
        }
    }
    Series { observed, drivers: Vec::new(), drifting_drivers: drifting }
}
