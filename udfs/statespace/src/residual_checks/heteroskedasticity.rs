//! Whether the size of the errors changes over time (DK 2.12.1; H 5.4).

use super::Statistic;
use crate::quantile::f_upper_tail;

/// Constant variance: H(h) = (sum of the last h squared errors) / (sum of the first h), h = n/3 rounded to
/// the nearest whole number, with the two-sided p-value from F(h, h): DK 2.12.1; H 5.4; CK ch. 8.
///
/// Above 1 the errors grow, below 1 they shrink. Errors are taken around zero, not around their mean, so
/// H does not change with their scale but does with a shift. NaN for fewer than three errors, or where the
/// first third of them is zero throughout. The `df` of the result is h.
pub fn heteroskedasticity(errors: &[f64]) -> Statistic {
    let n = errors.len();
    if n < 3 {
        return Statistic::NONE;
    }
    let h = (n + 1) / 3;
    let square = |e: &f64| e * e;
    let first: f64 = errors.iter().take(h).map(square).sum();
    let last: f64 = errors.iter().rev().take(h).map(square).sum();
    // Under F(h, h), H and 1/H have the same law: the one above 1 carries the p-value as a tail.
    let p_value = |ratio: f64| (2.0 * f_upper_tail(ratio.max(1.0 / ratio), h as f64, h as f64)).min(1.0);
    Statistic::new(last / first, h, p_value)
}
