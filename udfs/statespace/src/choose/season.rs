//! Whether the data speak for a season: the autocorrelation at its period, against the bound that it has without one.
//!
//! What a wandering level would add is taken off first by the moving average over a period (classical decomposition), and what
//! the earlier candidates explain by their average pattern. The rule as a whole is stated at [`crate::choose`].

use crate::quantile::normal_quantile;

/// The candidates that the data speak for, each tested on what the ones before it leave: a weekly pattern in hourly data must show beside the
/// daily one, which comes round after a week too.
pub(super) fn speaking(values: &[f64], candidates: &[f64]) -> Vec<f64> {
    let mut rest = values.to_vec();
    let mut kept = Vec::new();
    for &period in candidates {
        if season_speaks(&rest, period) {
            kept.push(period);
            rest = without_pattern(&rest, period.round() as usize);
        }
    }
    kept
}

/// The series less its average pattern over a period: for each step of the period the mean of what the moving average leaves
/// (classical decomposition, common practice).
fn without_pattern(values: &[f64], period: usize) -> Vec<f64> {
    let rest = without_moving_average(values, period);
    let (mut sums, mut counts) = (vec![0.0; period], vec![0.0; period]);
    for (t, v) in rest.iter().enumerate().filter(|(_, v)| !v.is_nan()) {
        sums[t % period] += v;
        counts[t % period] += 1.0;
    }
    values
        .iter()
        .enumerate()
        .map(|(t, v)| if counts[t % period] > 0.0 { v - sums[t % period] / counts[t % period] } else { *v })
        .collect()
}

/// What is left of the series after its moving average over a period is autocorrelated at the period.
///
/// Under no season the autocorrelation at lag s has about the variance `(1 + 2 sum r_k^2) / pairs` (Bartlett 1946); the sum runs
/// over lags up to a quarter of the period, which hold what a wandering level leaves behind.
fn season_speaks(values: &[f64], period: f64) -> bool {
    let lag = period.round() as usize;
    let seen = values.iter().filter(|v| !v.is_nan()).count() as f64;
    if lag < 2 || seen < 3.0 * period || values.len() < 3 * lag || !every_step_is_seen(values, lag) {
        return false;
    }
    let rest = without_moving_average(values, lag);
    let variance = mean_product(&rest, 0).0;
    if !(variance > 0.0) {
        return false;
    }
    let (at_period, pairs) = mean_product(&rest, lag);
    let short: f64 = (1..=(lag / 4).max(1)).map(|k| (mean_product(&rest, k).0 / variance).powi(2)).sum();
    let bound = normal_quantile(0.95) * ((1.0 + 2.0 * short) / pairs.max(1.0)).sqrt();
    pairs >= 3.0 && at_period / variance > bound
}

/// Each step of the period is observed at least twice. Working days have no weekly pattern that the data could show: two
/// of its seven steps are never there.
fn every_step_is_seen(values: &[f64], period: usize) -> bool {
    (0..period).all(|phase| values.iter().skip(phase).step_by(period).filter(|v| !v.is_nan()).count() >= 2)
}

/// The series less its centred moving average over `period` points (half weights at the ends of an even one: classical
/// decomposition, common practice); NaN near the ends and where under half of the window is observed.
fn without_moving_average(values: &[f64], period: usize) -> Vec<f64> {
    let half = period / 2;
    let edge = if period.is_multiple_of(2) { 0.5 } else { 1.0 };
    (0..values.len())
        .map(|t| {
            if t < half || t + half >= values.len() {
                return f64::NAN;
            }
            let (mut sum, mut weight) = (0.0, 0.0);
            for (i, v) in values[t - half..=t + half].iter().enumerate() {
                if !v.is_nan() {
                    let w = if i == 0 || i == 2 * half { edge } else { 1.0 };
                    sum += w * v;
                    weight += w;
                }
            }
            if weight * 2.0 < period as f64 { f64::NAN } else { values[t] - sum / weight }
        })
        .collect()
}

/// Mean product of the pairs `lag` apart that are both there, and their number.
fn mean_product(values: &[f64], lag: usize) -> (f64, f64) {
    let (mut sum, mut count) = (0.0, 0.0);
    for (a, b) in values.iter().zip(&values[lag.min(values.len())..]) {
        let product = a * b;
        if !product.is_nan() {
            sum += product;
            count += 1.0;
        }
    }
    if count > 0.0 { (sum / count, count) } else { (0.0, 0.0) }
}

#[cfg(test)]
mod tests;
