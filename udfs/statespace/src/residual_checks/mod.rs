//! Whether to believe a fit: checks of its standardised one-step errors, and how much better it is than
//! a random walk.
//!
//! If the model is right, v_t / sqrt(F_t) are independent standard normal (DK 2.12, 7.5; H 5.4). Three
//! assumptions are checked, in the order of their weight (CK ch. 8): independence ([`ljung_box`]),
//! constant variance ([`heteroskedasticity`]), normality ([`skewness`], [`kurtosis`], [`bowman_shenton`]).
//!
//! Everywhere `errors` are the standardised errors in time order **without** the points that have none
//! (missing points, and the steps at which a diffuse element is still being settled). Lags count errors,
//! not grid points, so an error after a gap follows the last one before it.
//!
//! All functions are total. Where a check has no meaning (fewer than three errors, errors that do not
//! vary, a value that is not finite) its [`Statistic`] holds NaN.

mod autocorrelation;
mod goodness_of_fit;
mod heteroskedasticity;
mod moments;

pub use autocorrelation::{autocorrelations, default_lags, ljung_box};
pub use goodness_of_fit::{aic, bic, r_squared_drift, r_squared_season, sum_of_squared_errors};
pub use heteroskedasticity::heteroskedasticity;
pub use moments::{Moments, bowman_shenton, kurtosis, moments, skewness};

/// One check: its value, and how likely a value at least that far out is if the model is right.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Statistic {
    /// The statistic; NaN where the check has no meaning.
    pub value: f64,
    /// Degrees of freedom of the reference distribution: chi-square(df), or F(df, df) for
    /// heteroskedasticity; 0 where the reference is the normal or there is no value.
    pub df: usize,
    /// The p-value in [0, 1]; NaN exactly where `value` is.
    pub p_value: f64,
}

impl Statistic {
    /// The answer where a check has no meaning.
    const NONE: Self = Self { value: f64::NAN, df: 0, p_value: f64::NAN };

    /// `p_value` is asked for only if `value` is a number, so the two are NaN together.
    fn new(value: f64, df: usize, p_value: impl FnOnce(f64) -> f64) -> Self {
        if !value.is_finite() {
            return Self::NONE;
        }
        let p_value = p_value(value);
        if p_value.is_nan() { Self::NONE } else { Self { value, df, p_value } }
    }
}
