//! Whether the errors still depend on one another: autocorrelations and the portmanteau statistic Q.
//!
//! r_j = sum_{t > j} (e_t - m)(e_{t-j} - m) / sum_t (e_t - m)^2 with the mean m of all errors: DK 2.12.1.

use super::Statistic;
use super::moments::Centred;
use crate::quantile::chi_square_upper_tail;

/// Autocorrelations r_1, ..., r_`lags` of the errors (DK 2.12.1).
///
/// The vector always has `lags` elements; those at lags that the errors do not reach, and all of them where
/// the errors do not vary, are NaN.
pub fn autocorrelations(errors: &[f64], lags: usize) -> Vec<f64> {
    let centred = Centred::new(errors);
    let at = |lag| centred.as_ref().map_or(f64::NAN, |c| c.autocorrelation(lag));
    (1..=lags).map(at).collect()
}

/// Independence: Q(k) = n (n + 2) sum_{j=1}^{k} r_j^2 / (n - j) over k = `lags` lags: Ljung & Box (1978),
/// *Biometrika* 65; DK 2.12.1.
///
/// `estimated` is the number w of estimated parameters, those found at zero included. The p-value is that of
/// chi-square with k - w + 1 degrees of freedom (H 5.4 and CK ch. 8, both quoted from memory): errors are
/// standardised, so only the w - 1 parameters relative to the scale bend their correlations. Nothing
/// estimated takes nothing off. Degrees of freedom never fall below 1: with so few lags the p-value is a
/// cautious guess at best, and more lags should be asked for.
///
/// NaN where `lags` is 0 or not below the number of errors.
pub fn ljung_box(errors: &[f64], lags: usize, estimated: usize) -> Statistic {
    let n = errors.len();
    let Some(centred) = Centred::new(errors).filter(|_| (1..n).contains(&lags)) else {
        return Statistic::NONE;
    };
    let sum: f64 = (1..=lags).map(|lag| centred.autocorrelation(lag).powi(2) / (n - lag) as f64).sum();
    let df = lags.saturating_sub(estimated.saturating_sub(1)).max(1);
    Statistic::new(n as f64 * (n as f64 + 2.0) * sum, df, |q| chi_square_upper_tail(q, df as f64))
}

/// How many lags Q should look at for `n` errors of a series with season `period` (in steps; 0 or 1 = none).
///
/// Ten, or two periods where that is more, but no more than a fifth of the errors and at least one (common practice).
pub fn default_lags(n: usize, period: f64) -> usize {
    let two_periods = if period.is_finite() { (2.0 * period).round() } else { 0.0 };
    // The cast saturates, so that an absurd period is cut to n / 5 like any other.
    (two_periods.max(10.0) as usize).min(n / 5).max(1)
}

impl Centred<'_> {
    /// r_`lag`; NaN at a lag that the errors do not reach.
    fn autocorrelation(&self, lag: usize) -> f64 {
        let Some(later) = self.errors.get(lag..).filter(|later| !later.is_empty()) else {
            return f64::NAN;
        };
        let products = later.iter().zip(self.errors).map(|(a, b)| (a - self.mean) * (b - self.mean));
        products.sum::<f64>() / self.squares
    }
}
