//! Forecasts on the model scale: mean and variance per step, and the joint covariance of the steps.
//!
//! DK 4.11, 2.8: the filter runs on with missing observations. The diffuse elements' share of the variance is the sum of
//! squares of the white columns, as everywhere.

use crate::filter::End;
use crate::smoother::{Functional, Smoothed};
use crate::system::System;

/// Forecast of `h` steps on the model scale.
#[derive(Debug, Clone, Default, PartialEq)]
pub(crate) struct Path {
    /// Signal mean and variance (without the irregular).
    pub(crate) signal: Smoothed,
    /// One entry per functional.
    pub(crate) functionals: Vec<Smoothed>,
    /// Variance of the running sum of the observations to come, length h.
    pub(crate) sum_variance: Vec<f64>,
}

/// One step, for whoever needs the joint distribution.
pub(crate) struct Step<'a> {
    /// Mean of the observation.
    pub(crate) mean: f64,
    /// Variance of the observation.
    pub(crate) variance: f64,
    /// Covariance with each earlier step's observation, in order.
    pub(crate) with_earlier: &'a [f64],
}

/// What a forecast goes on from.
#[derive(Debug, Clone, Copy)]
pub(crate) struct From<'a> {
    pub(crate) system: &'a System,
    /// Where the series ends.
    pub(crate) end: &'a End,
    /// Drivers with constant coefficients, then those that load on states, from the first step on.
    pub(crate) drivers: &'a [Vec<f64>],
    pub(crate) drifting: &'a [Vec<f64>],
    /// Index of the first step in the drivers.
    pub(crate) first: usize,
}

/// Runs on for `h` steps. The drivers must reach that far. `joint` is
/// called at each step; it costs h^2 m operations in all and h m numbers of memory.
pub(crate) fn run(
    from: From<'_>,
    h: usize,
    functionals: &[Functional],
    mut joint: Option<&mut dyn FnMut(Step<'_>)>,
) -> Path {
    let From { system, end, drifting, first, .. } = from;
    let (m, width) = (system.states, end.width);
    let (mut a, mut p) = (end.state.clone(), end.covariance.clone());
    system.forward(&mut a, width);
    system.propagate(&mut p);
    system.disturb(&mut p);
    let mut path = Path {
        signal: Smoothed { mean: Vec::with_capacity(h), variance: Vec::with_capacity(h) },
        functionals: functionals.iter().map(|_| Smoothed::default()).collect(),
        sum_variance: Vec::with_capacity(h),
    };
    // White columns of each step's signal, for the part of the covariance that the diffuse elements share.
    let mut rows: Vec<f64> = Vec::new();
    // Covariance of each earlier observation with the state, carried along, and with the observation at hand.
    let (mut ahead, mut with_earlier): (Vec<f64>, Vec<f64>) = (Vec::new(), Vec::new());
    // Covariance of the running sum with the state, and the sum's own white columns.
    let (mut sum_state, mut sum_row, mut sum_variance) = (vec![0.0; m], vec![0.0; width], 0.0);
    let (mut pz, mut row) = (vec![0.0; m], vec![0.0; width]);
    for step in 0..h {
        let t = first + step;
        row.fill(0.0);
        pz.fill(0.0);
        system.for_loads(drifting, t, |state, load| {
            for (to, from) in row.iter_mut().zip(&a[state * width..]) {
                *to += load * from;
            }
            for (to, from) in pz.iter_mut().zip(&p[state * m..(state + 1) * m]) {
                *to += load * from;
            }
        });
        for (x, coefficient) in from.drivers.iter().zip(end.coefficients.chunks_exact(width)) {
            row.iter_mut().zip(coefficient).for_each(|(to, from)| *to += x[t] * from);
        }
        let mut conditional = 0.0;
        let mut with_sum = 0.0;
        system.for_loads(drifting, t, |state, load| {
            conditional += load * pz[state];
            with_sum += load * sum_state[state];
        });
        // A state that is known exactly leaves a covariance of rounding, of either sign.
        let conditional = f64::max(conditional, 0.0);
        let white: f64 = row[1..].iter().map(|v| v * v).sum();
        path.signal.mean.push(row[0]);
        path.signal.variance.push(conditional + white);
        sum_variance += conditional + system.h + 2.0 * with_sum;
        sum_row.iter_mut().zip(&row).for_each(|(to, from)| *to += from);
        path.sum_variance.push(sum_variance.max(0.0) + sum_row[1..].iter().map(|v| v * v).sum::<f64>());
        for (functional, out) in functionals.iter().zip(&mut path.functionals) {
            let (mean, variance) = evaluate(functional, drifting, t, &a, &p, m, width);
            out.mean.push(mean);
            out.variance.push(variance);
        }
        if let Some(joint) = &mut joint {
            with_earlier.clear();
            // By number and not in chunks of m: a model of drivers alone has no state, but its steps share coefficients.
            for (i, earlier) in rows.chunks_exact(width).enumerate() {
                let state = &mut ahead[i * m..(i + 1) * m];
                let mut c: f64 = earlier[1..].iter().zip(&row[1..]).map(|(a, b)| a * b).sum();
                system.for_loads(drifting, t, |s, load| c += load * state[s]);
                with_earlier.push(c);
                system.forward(state, 1);
            }
            let variance = conditional + white + system.h;
            joint(Step { mean: row[0], variance, with_earlier: &with_earlier });
            rows.extend_from_slice(&row);
            ahead.extend_from_slice(&pz);
            let fresh = ahead.len() - m;
            system.forward(&mut ahead[fresh..], 1);
        }
        for (to, from) in sum_state.iter_mut().zip(&pz) {
            *to += from;
        }
        system.forward(&mut sum_state, 1);
        system.forward(&mut a, width);
        system.propagate(&mut p);
        system.disturb(&mut p);
    }
    path
}

/// Mean and variance of one functional of the predicted state.
fn evaluate(
    functional: &Functional,
    drifting: &[Vec<f64>],
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
            one = [(*state, drifting[*driver][t])];
            &one
        }
        Functional::Signal => &[],
    };
    let mut columns = vec![0.0; width];
    let mut conditional = 0.0_f64;
    for &(i, w) in weights {
        for (to, from) in columns.iter_mut().zip(&a[i * width..(i + 1) * width]) {
            *to += w * from;
        }
        conditional += weights.iter().map(|&(j, v)| w * v * p[i * m + j]).sum::<f64>();
    }
    (columns[0], conditional.max(0.0) + columns[1..].iter().map(|v| v * v).sum::<f64>())
}
