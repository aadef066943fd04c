//! Quantiles and tail probabilities of the distributions that intervals and checks refer to.
//!
//! Every function is total: an argument outside its range gives NaN, never a panic, and tails are computed
//! as tails, so that a probability of 1e-60 keeps its digits.
//!
//! The special functions are those of `statrs`. Measured against 40-digit values: its inverse of erfc is
//! good to 4e-16 relative, its incomplete gamma to 3e-13 and its incomplete beta to 1e-12 over the range
//! met here (see each function). Its erfc is good to 1e-10 only, so normal tails go through the incomplete
//! gamma, which is the same function in better digits.

use statrs::function::beta::checked_beta_reg;
use statrs::function::erf::erfc_inv;
use statrs::function::gamma::checked_gamma_ur;
use std::f64::consts::SQRT_2;

/// The z with P(Z <= z) = `p` for a standard normal Z.
///
/// `p` = 0 and 1 give -inf and inf; NaN outside [0, 1]. Relative error below 4e-16 between 1e-300 and 0.5.
/// Near 1, where `p` itself runs out of digits, ask for `-normal_quantile(1 - p)` with the tail as written.
pub fn normal_quantile(p: f64) -> f64 {
    if !(0.0..=1.0).contains(&p) {
        return f64::NAN;
    }
    -SQRT_2 * erfc_inv(2.0 * p)
}

/// P(|Z| > |`z`|) for a standard normal Z; NaN for NaN. Below about 1e-308 (|z| = 37.6) it is 0.
///
/// erfc(|z| / sqrt 2) = Q(1/2, z^2 / 2): Abramowitz & Stegun (1964), *Handbook of Mathematical Functions*,
/// 6.5.17.
pub fn normal_two_sided_tail(z: f64) -> f64 {
    chi_square_upper_tail(z * z, 1.0)
}

/// P(X > `x`) for a chi-square X with `df` degrees of freedom, Q(df / 2, x / 2): Abramowitz & Stegun 26.4.19.
///
/// 1 for `x` <= 0, 0 for `x` = inf (and below about 1e-308); NaN where `df` is not above zero and finite or
/// `x` is NaN. Relative error below 3e-13 up to 1,000 degrees of freedom.
pub fn chi_square_upper_tail(x: f64, df: f64) -> f64 {
    if x.is_nan() || !(df > 0.0 && df.is_finite()) {
        f64::NAN
    } else if 0.5 * x <= 0.0 {
        1.0
    } else if x.is_infinite() {
        0.0
    } else {
        checked_gamma_ur(0.5 * df, 0.5 * x).unwrap_or(f64::NAN)
    }
}

/// P(X > `x`) for an F-distributed X with `df1` and `df2` degrees of freedom, as the regularised incomplete
/// beta function at df2 / (df2 + df1 x): Abramowitz & Stegun 26.6.2.
///
/// 1 for `x` <= 0, 0 for `x` = inf; NaN where a degree of freedom is not above zero and finite or `x` is
/// NaN. Relative error below 1e-12 up to 3,000 degrees of freedom each, 1e-9 up to 100,000, 1e-5 beyond.
pub fn f_upper_tail(x: f64, df1: f64, df2: f64) -> f64 {
    let valid = |df: f64| df > 0.0 && df.is_finite();
    if x.is_nan() || !valid(df1) || !valid(df2) {
        return f64::NAN;
    }
    if x <= 0.0 {
        return 1.0;
    }
    checked_beta_reg(0.5 * df2, 0.5 * df1, df2 / (df2 + df1 * x)).unwrap_or(f64::NAN)
}
