//! From a series to the ordinates of its spectrum: first differences, the fixed pattern taken off, the cosine transform.

use std::f64::consts::{PI, TAU};

use crate::instructions::Task;
use crate::structure::{Model, Role};
use crate::system::Op;

/// Fewest differences.
const FEWEST: usize = 8;
/// Every ordinate is taken up to this one, and evenly spread ones, about as many, of those above.
const DENSE: usize = 200;
/// Ordinates nearer to a seasonal frequency are left out.
const NEAR_POLE: f64 = 0.75;

/// Where a season has its poles.
#[derive(Debug, Clone)]
pub(super) enum Poles {
    /// Dummy form of this period.
    Dummy(f64),
    /// Frequencies of harmonics.
    Harmonics(Vec<f64>),
}

/// First differences from the first observed point on; `None` where too much is missing. Without a season a gap is left out, its step brought to
/// the length of one by the mean slope: a filled point would have no irregular. With one, which a gap must not shift, it is filled from the same step
/// of the periods beside it, and by a straight line where they miss it too.
pub(super) fn filled_differences(observed: &[f64], period: Option<usize>) -> Option<Vec<f64>> {
    let seen = &observed[observed.iter().position(|v| !v.is_nan())?..];
    let end = seen.iter().rposition(|v| !v.is_nan())?;
    let drift = (seen[end] - seen[0]) / (end as f64).max(1.0);
    let beside = |t: usize| -> Option<f64> {
        let period = period?;
        let before = t.checked_sub(period).map(|at| seen[at]).filter(|v| !v.is_nan());
        let after = seen.get(t + period).copied().filter(|v| !v.is_nan());
        match (before, after) {
            (Some(before), Some(after)) => Some(0.5 * (before + after)),
            (Some(before), None) => Some(before + drift * period as f64),
            (None, after) => after.map(|after| after - drift * period as f64),
        }
    };
    let mut differences = Vec::with_capacity(end);
    let (mut last, mut gap, mut missing) = (seen[0], 1, 0);
    for (t, &value) in seen[..=end].iter().enumerate().skip(1) {
        missing += usize::from(value.is_nan());
        let value = if value.is_nan() { beside(t).unwrap_or(f64::NAN) } else { value };
        if value.is_nan() {
            gap += 1;
            continue;
        }
        if period.is_some() {
            let step = (value - last) / f64::from(gap);
            differences.extend((0..gap).map(|_| step));
        } else {
            differences.push(value - last - f64::from(gap - 1) * drift);
        }
        (last, gap) = (value, 1);
    }
    (differences.len() >= FEWEST && missing * 3 <= end).then_some(differences)
}

/// The seasons of a model: variance (none where the pattern is fixed) and poles.
pub(super) fn seasons(model: &Model) -> Vec<(Option<usize>, Poles)> {
    let mut out: Vec<(Option<usize>, Poles)> = Vec::new();
    let mut offset = 0;
    for op in &model.assembly.blocks {
        let state = &model.assembly.states[offset];
        offset += op.len();
        if state.role != Role::Season {
            continue;
        }
        let pole = match op {
            Op::Season { len } => {
                out.push((state.variance, Poles::Dummy(*len as f64 + 1.0)));
                continue;
            }
            Op::Rotate { cos, sin } => sin.atan2(*cos).rem_euclid(TAU).min(PI),
            _ => PI,
        };
        // Harmonics of one season share their variance; those of fixed seasons may stand together as well.
        match out.last_mut() {
            Some((variance, Poles::Harmonics(poles))) if *variance == state.variance => poles.push(pole),
            _ => out.push((state.variance, Poles::Harmonics(vec![pole]))),
        }
    }
    out
}

/// The nearest whole period.
pub(super) fn period(poles: &Poles) -> usize {
    match poles {
        Poles::Dummy(period) => *period as usize,
        Poles::Harmonics(poles) => (TAU / poles[0]).round() as usize,
    }
}

/// Pseudo-spectrum of a season of unit variance (H 2.4).
pub(super) fn seasonal(poles: &Poles, w: f64) -> f64 {
    match poles {
        Poles::Dummy(period) => (2.0 - 2.0 * w.cos()) / (2.0 - 2.0 * (period * w).cos()).max(1e-9),
        Poles::Harmonics(poles) => poles
            .iter()
            .map(|&pole| {
                if pole == PI {
                    1.0 / (2.0 + 2.0 * w.cos()).max(1e-9)
                } else {
                    let apart = w.cos() - pole.cos();
                    (2.0 - 2.0 * pole.cos() * w.cos()) / (4.0 * apart * apart).max(1e-9)
                }
            })
            .sum(),
    }
}

/// Takes a fixed pattern off: means of the steps of a period, or waves one after another.
pub(super) fn take_off(poles: &Poles, differences: &mut [f64]) {
    let n = differences.len();
    match poles {
        Poles::Dummy(period) => {
            let period = *period as usize;
            let mean = differences.iter().sum::<f64>() / n as f64;
            for step in 0..period {
                let steps = (step..n).step_by(period);
                let count = steps.len() as f64;
                let own = steps.clone().map(|t| differences[t]).sum::<f64>() / count.max(1.0);
                steps.for_each(|t| differences[t] -= own - mean);
            }
        }
        // Waves over a broken number of periods are not quite orthogonal: a second round takes what the first one left.
        Poles::Harmonics(poles) => {
            for &pole in poles.iter().chain(poles) {
                let (turn_sin, turn_cos) = pole.sin_cos();
                let (mut sin, mut cos) = (0.0, 1.0);
                let (mut of_sin, mut of_cos, mut sin_square) = (0.0, 0.0, 0.0);
                for d in differences.iter() {
                    of_sin += d * sin;
                    of_cos += d * cos;
                    sin_square += sin * sin;
                    (sin, cos) = (sin * turn_cos + cos * turn_sin, cos * turn_cos - sin * turn_sin);
                }
                let a = if sin_square > 1e-6 * n as f64 { of_sin / sin_square } else { 0.0 };
                let b = of_cos / (n as f64 - sin_square);
                (sin, cos) = (0.0, 1.0);
                for d in differences.iter_mut() {
                    *d -= a * sin + b * cos;
                    (sin, cos) = (sin * turn_cos + cos * turn_sin, cos * turn_cos - sin * turn_sin);
                }
            }
        }
    }
}

/// The frequencies that are looked at, and for how many ordinates each stands.
pub(super) fn ordinates(n: usize, with_mean: bool, seasons: &[(Option<usize>, Poles)]) -> Vec<(usize, f64)> {
    let step = PI / n as f64;
    let mut poles: Vec<f64> = Vec::new();
    for (_, season) in seasons {
        match season {
            Poles::Dummy(period) => {
                poles.extend((1..=(period / 2.0) as usize).map(|j| TAU * j as f64 / period / step));
            }
            Poles::Harmonics(all) => poles.extend(all.iter().map(|pole| pole / step)),
        }
    }
    let apart = |k: usize| poles.iter().fold(f64::INFINITY, |a, pole| a.min((k as f64 - pole).abs()));
    let mut out: Vec<(usize, f64)> = Vec::new();
    let stride = 1 + n.saturating_sub(DENSE) / DENSE;
    let mut passed = 0.0;
    for k in usize::from(!with_mean)..n {
        let distance = apart(k);
        if distance < NEAR_POLE {
            continue;
        }
        passed += 1.0;
        if k > DENSE && distance > 2.5 && !k.is_multiple_of(stride) {
            continue;
        }
        out.push((k, passed));
        passed = 0.0;
    }
    out
}

/// The cosine transform at frequencies whose halves have these cosines.
pub(super) struct Transform<'a> {
    pub(super) x: &'a [f64],
    pub(super) half: &'a [f64],
}

impl Task for Transform<'_> {
    type Output = Vec<f64>;

    /// Coefficients: cos(w (t + 1/2)) by the recurrence of Chebyshev, all frequencies side by side.
    #[inline(always)]
    fn run(self) -> Vec<f64> {
        let Self { x, half } = self;
        let k = half.len();
        let twice: Vec<f64> = half.iter().map(|h| 4.0 * h * h - 2.0).collect();
        let (mut now, mut before) = (half.to_vec(), half.to_vec());
        let mut sum = vec![0.0; k];
        for &x in x {
            for (((sum, now), before), twice) in sum.iter_mut().zip(&mut now).zip(&mut before).zip(&twice) {
                *sum += x * *now;
                let next = twice * *now - *before;
                *before = *now;
                *now = next;
            }
        }
        sum
    }
}
