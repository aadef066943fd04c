//! Forecasts on the model scale: mean and variance per step, and the joint covariance of the steps.
//!
//! DK 4.11, 2.8: the filter runs on with missing observations. The diffuse elements' share of the variance is the sum of
//! squares of the white columns, as everywhere.

use crate::filter::{Data, Pass};
use crate::smoother::{Functional, Smoothed};
use crate::system::System;

/// Forecast of `h` steps on the model scale.
#[derive(Debug, Clone, Default, PartialEq)]
pub(crate) struct Path {
    /// Signal mean and variance (without the irregular).
    pub(crate) signal: Smoothed,
    /// One entry per functional.
    pub(crate) functionals: Vec<Smoothed>,
    /// `h x h` row-major covariance of the observations to come, when asked for.
    pub(crate) covariance: Option<Vec<f64>>,
    /// Variance of the running sum of the observations to come, length h.
    pub(crate) sum_variance: Vec<f64>,
}

/// Runs on from the end of `pass` (whitened) for `h` steps. `data` must hold drivers for `n + h` points.
pub(crate) fn run(
    system: &System,
    data: Data<'_>,
    pass: &Pass,
    h: usize,
    functionals: &[Functional],
    joint: bool,
) -> Path {
    let (n, m, width) = (pass.n, pass.m, pass.elements + 1);
    let mut a = pass.a.clone();
    for row in a.chunks_exact_mut(width) {
        pass.whiten(row);
    }
    let mut p = pass.p.clone();
    let mut path = Path {
        signal: Smoothed { mean: Vec::with_capacity(h), variance: Vec::with_capacity(h) },
        functionals: functionals.iter().map(|_| Smoothed::default()).collect(),
        covariance: joint.then(|| vec![0.0; h * h]),
        sum_variance: Vec::with_capacity(h),
    };
    // White columns of each step's signal, for the part of the covariance that the diffuse elements share.
    let mut rows: Vec<f64> = Vec::with_capacity(if joint { h * width } else { 0 });
    // Covariance of the running sum with the state, and the sum's own white columns.
    let (mut sum_state, mut sum_row, mut sum_variance) = (vec![0.0; m], vec![0.0; width], 0.0);
    let (mut pz, mut row) = (vec![0.0; m], vec![0.0; width]);
    for step in 0..h {
        let t = n + step;
        row.fill(0.0);
        pz.fill(0.0);
        system.for_loads(data.drifting, t, |state, load| {
            for (to, from) in row.iter_mut().zip(&a[state * width..]) {
                *to += load * from;
            }
            for (to, from) in pz.iter_mut().zip(&p[state * m..(state + 1) * m]) {
                *to += load * from;
            }
        });
        if !data.drivers.is_empty() {
            let mut columns = vec![0.0; width];
            for (k, x) in data.drivers.iter().enumerate() {
                columns[1 + system.diffuse.len() + k] = x[t];
            }
            pass.whiten(&mut columns);
            row.iter_mut().zip(&columns).for_each(|(to, from)| *to += from);
        }
        let mut conditional = 0.0;
        let mut with_sum = 0.0;
        system.for_loads(data.drifting, t, |state, load| {
            conditional += load * pz[state];
            with_sum += load * sum_state[state];
        });
        let white: f64 = row[1..].iter().map(|v| v * v).sum();
        path.signal.mean.push(row[0]);
        path.signal.variance.push(conditional + white);
        sum_variance += conditional + system.h + 2.0 * with_sum;
        sum_row.iter_mut().zip(&row).for_each(|(to, from)| *to += from);
        path.sum_variance.push(sum_variance + sum_row[1..].iter().map(|v| v * v).sum::<f64>());
        for (functional, out) in functionals.iter().zip(&mut path.functionals) {
            let (mean, variance) = evaluate(functional, data, t, &a, &p, m, width);
            out.mean.push(mean);
            out.variance.push(variance);
        }
        if let Some(covariance) = &mut path.covariance {
            rows.extend_from_slice(&row);
            covariance[step * h + step] = conditional + white + system.h;
            // T^k P_t Z' against later loads.
            let mut ahead = pz.clone();
            for later in step + 1..h {
                system.forward(&mut ahead, 1);
                let mut c = 0.0;
                system.for_loads(data.drifting, n + later, |state, load| c += load * ahead[state]);
                covariance[step * h + later] = c;
            }
        }
        for (to, from) in sum_state.iter_mut().zip(&pz) {
            *to += from;
        }
        system.forward(&mut sum_state, 1);
        system.forward(&mut a, width);
        system.propagate(&mut p);
        for i in 0..m {
            p[i * m + i] += system.q[i];
        }
    }
    if let Some(covariance) = &mut path.covariance {
        for i in 0..h {
            for j in i + 1..h {
                let (x, y) = (&rows[i * width + 1..(i + 1) * width], &rows[j * width + 1..(j + 1) * width]);
                let c = covariance[i * h + j] + x.iter().zip(y).map(|(a, b)| a * b).sum::<f64>();
                covariance[i * h + j] = c;
                covariance[j * h + i] = c;
            }
        }
    }
    path
}

/// Mean and variance of one functional of the predicted state.
fn evaluate(
    functional: &Functional,
    data: Data<'_>,
    t: usize,
    a: &[f64],
    p: &[f64],
    m: usize,
    width: usize,
) -> (f64, f64) {
    let one;
    let weights = match functional {
        Functional::States(weights) => weights.as_slice(),
        Functional::DriverEffect { state, driver } => {
            one = [(*state, data.drifting[*driver][t])];
            &one
        }
        Functional::Signal => &[],
    };
    let mut columns = vec![0.0; width];
    let mut conditional = 0.0;
    for &(i, w) in weights {
        for (to, from) in columns.iter_mut().zip(&a[i * width..(i + 1) * width]) {
            *to += w * from;
        }
        conditional += weights.iter().map(|&(j, v)| w * v * p[i * m + j]).sum::<f64>();
    }
    (columns[0], conditional + columns[1..].iter().map(|v| v * v).sum::<f64>())
}
