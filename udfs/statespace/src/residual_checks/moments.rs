//! Moments of the errors and the checks of normality built on them (DK 2.12.1; H 5.4).
//!
//! With m_q = (1/n) sum (e_t - m_1)^q, skewness is S = m_3 / m_2^(3/2) and kurtosis K = m_4 / m_2^2: the
//! plain moments divided by n, without small-sample corrections. For normal errors and large n,
//! S ~ N(0, 6/n) and K ~ N(3, 24/n), independently.

use super::Statistic;
use crate::quantile::{chi_square_upper_tail, normal_two_sided_tail};

/// The first four moments of a sample.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Moments {
    /// How many values.
    pub n: usize,
    /// Their mean; NaN without values.
    pub mean: f64,
    /// Mean squared deviation (divided by n, not n - 1); NaN without values.
    pub variance: f64,
    /// Skewness; NaN for fewer than three values or values that do not vary.
    pub skewness: f64,
    /// Kurtosis (3 = normal); NaN where the skewness is.
    pub kurtosis: f64,
}

/// Moments by two passes with a corrected mean, which keeps the digits of a small spread around a large
/// mean: Chan, Golub & LeVeque (1983), *The American Statistician* 37.
pub fn moments(values: &[f64]) -> Moments {
    let n = values.len();
    let mean = mean(values);
    let squares: f64 = values.iter().map(|x| (x - mean).powi(2)).sum();
    let variance = squares / n as f64;
    let Some(centred) = Centred::new(values) else {
        return Moments { n, mean, variance, skewness: f64::NAN, kurtosis: f64::NAN };
    };
    // Standardised before they are raised to powers, so that no unit of measurement overflows.
    let deviation = (centred.squares / n as f64).sqrt();
    let (mut cubes, mut fourths) = (0.0, 0.0);
    for z in values.iter().map(|x| (x - mean) / deviation) {
        cubes += z * z * z;
        fourths += (z * z) * (z * z);
    }
    Moments { n, mean, variance, skewness: cubes / n as f64, kurtosis: fourths / n as f64 }
}

/// Skewness S with its two-sided p-value against 0 from N(0, 6/n): DK 2.12.1.
pub fn skewness(errors: &[f64]) -> Statistic {
    let Moments { n, skewness, .. } = moments(errors);
    Statistic::new(skewness, 0, |s| normal_two_sided_tail(s * (n as f64 / 6.0).sqrt()))
}

/// Kurtosis K (3 = normal) with its two-sided p-value against 3 from N(3, 24/n): DK 2.12.1.
pub fn kurtosis(errors: &[f64]) -> Statistic {
    let Moments { n, kurtosis, .. } = moments(errors);
    Statistic::new(kurtosis, 0, |k| normal_two_sided_tail((k - 3.0) * (n as f64 / 24.0).sqrt()))
}

/// Normality: N = n (S^2 / 6 + (K - 3)^2 / 24) against chi-square(2): Bowman & Shenton (1975), *Biometrika*
/// 62; DK 2.12.1.
pub fn bowman_shenton(errors: &[f64]) -> Statistic {
    let Moments { n, skewness, kurtosis, .. } = moments(errors);
    let value = n as f64 * (skewness.powi(2) / 6.0 + (kurtosis - 3.0).powi(2) / 24.0);
    Statistic::new(value, 2, |x| chi_square_upper_tail(x, 2.0))
}

/// The mean, corrected once by the mean of what is left, which takes back the rounding of the first sum.
fn mean(values: &[f64]) -> f64 {
    let n = values.len() as f64;
    let first = values.iter().sum::<f64>() / n;
    first + values.iter().map(|x| x - first).sum::<f64>() / n
}

/// Errors seen from their mean; exists only where they vary, so that a ratio of their moments has a meaning.
pub(super) struct Centred<'a> {
    pub(super) errors: &'a [f64],
    pub(super) mean: f64,
    /// Sum of squared deviations: a normal number above zero.
    pub(super) squares: f64,
}

impl<'a> Centred<'a> {
    /// None for fewer than three errors, a value that is not finite, or a spread that is no more than
    /// the rounding of the values themselves.
    pub(super) fn new(errors: &'a [f64]) -> Option<Self> {
        let n = errors.len();
        let mean = mean(errors);
        let squares: f64 = errors.iter().map(|x| (x - mean).powi(2)).sum();
        let largest = errors.iter().fold(0.0_f64, |m, x| m.max(x.abs()));
        let rounding = n as f64 * (4.0 * f64::EPSILON * largest).powi(2);
        (n >= 3 && squares.is_normal() && squares > rounding).then_some(Self { errors, mean, squares })
    }
}
