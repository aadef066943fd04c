//! Autoregression of order p beside the irregular (H 4.1.3, DK eq. 3.19): `x_{t+1} = ar_1 x_t + ... + ar_p x_{t-p+1} + k_t`,
//! `k_t ~ N(0, autoregression)`; states `[x_t, ..., x_{t-p+1}]`, `Z = (1, 0, ..., 0)`.
//!
//! Stationary start: the covariance solves `P = T P T' + Q` (DK 5.6.2), by doubling (Anderson & Moore 1979, *Optimal
//! Filtering*, 6.7): `P <- P + M P M'`, `M <- M M`. Coefficients outside the stationary region are refused.

use super::assembly::{Assembly, Load, Shape, StateSpec};
use super::model::{Effect, Link, NotStationary, Role};
use crate::system::{Op, ProperStart};

/// Largest order: its start is solved in fixed buffers, without allocation.
pub(crate) const MAX_ORDER: usize = 8;

pub(super) fn add(assembly: &mut Assembly, order: usize) {
    let variance = assembly.parameter("autoregression", Role::Autoregression, Link::Variance);
    let first = assembly.parameters.len();
    for lag in 1..=order {
        assembly.parameter(format!("ar_{lag}"), Role::Autoregression, Link::Free);
    }
    let states = (0..order).map(|i| StateSpec {
        name: format!("autoregression_lag_{i}"),
        role: Role::Autoregression,
        load: if i == 0 { Load::Fixed(1.0) } else { Load::None },
        variance: (i == 0).then_some(variance),
        diffuse: false,
    });
    let block = assembly.block(Op::Autoregression { coefficients: vec![0.0; order] }, states);
    assembly.shape(block, Shape::Autoregression { first, order, variance });
}

type Square = [[f64; MAX_ORDER]; MAX_ORDER];

/// Fills block, start and derivatives of `effects[first..first + order]` and `effects[variance]`.
pub(super) fn fill(
    coefficients: &[f64],
    variance: f64,
    offset: usize,
    op: &mut Op,
    start: &mut ProperStart,
    effects: &mut [Effect],
    (first, variance_index): (usize, usize),
) -> Result<(), NotStationary> {
    let order = coefficients.len();
    if let Op::Autoregression { coefficients: c } = op {
        c.copy_from_slice(coefficients);
    }
    let mut t: Square = [[0.0; MAX_ORDER]; MAX_ORDER];
    t[0][..order].copy_from_slice(coefficients);
    for i in 1..order {
        t[i][i - 1] = 1.0;
    }
    let mut unit: Square = [[0.0; MAX_ORDER]; MAX_ORDER];
    unit[0][0] = 1.0;
    // Covariance for a unit variance; everything else scales with it.
    let p = solve(&t, unit, order)?;
    (start.offset, start.size) = (offset, order);
    start.covariance.clear();
    for i in 0..order {
        for j in 0..order {
            start.covariance.push(variance * p[i][j]);
            effects[variance_index].start.push((offset + i, offset + j, p[i][j]));
        }
    }
    for lag in 0..order {
        effects[first + lag].transition.push((offset, offset + lag, 1.0));
        // dP = T dP T' + dT P T' + T P dT', dT = e_0 e_lag'.
        let mut source: Square = [[0.0; MAX_ORDER]; MAX_ORDER];
        for j in 0..order {
            let cross: f64 = (0..order).map(|k| t[j][k] * p[k][lag]).sum();
            source[0][j] += cross;
            source[j][0] += cross;
        }
        let dp = solve(&t, source, order)?;
        for i in 0..order {
            for j in 0..order {
                effects[first + lag].start.push((offset + i, offset + j, variance * dp[i][j]));
            }
        }
    }
    Ok(())
}

/// Solves `P = T P T' + source` by doubling.
fn solve(t: &Square, source: Square, order: usize) -> Result<Square, NotStationary> {
    let (mut m, mut p) = (*t, source);
    for _ in 0..64 {
        let mp = product(&m, &p, order, false);
        let step = product(&mp, &m, order, true);
        let mut largest = 0.0_f64;
        for i in 0..order {
            for j in 0..order {
                p[i][j] += step[i][j];
                largest = largest.max(step[i][j].abs());
            }
        }
        if !largest.is_finite() || largest > 1e100 {
            return Err(NotStationary);
        }
        let size = (0..order).fold(0.0_f64, |a, i| a.max(p[i][i].abs()));
        if largest <= 1e-17 * size || largest == 0.0 {
            return Ok(p);
        }
        m = product(&m, &m, order, false);
    }
    Err(NotStationary)
}

fn product(a: &Square, b: &Square, order: usize, transposed: bool) -> Square {
    let mut out = [[0.0; MAX_ORDER]; MAX_ORDER];
    for i in 0..order {
        for j in 0..order {
            out[i][j] = (0..order).map(|k| a[i][k] * if transposed { b[j][k] } else { b[k][j] }).sum();
        }
    }
    out
}
