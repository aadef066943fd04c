//! From the model scale to the data's.
//!
//! Logarithm: if `x ~ N(m, v)` then `exp(x)` has the quantiles `exp(m + z sqrt(v))` exactly, mean `exp(m + v/2)` and
//! variance `mean^2 (exp(v) - 1)` (Johnson, Kotz & Balakrishnan 1994, *Continuous Univariate Distributions* 1, ch. 14). A sum of
//! such values has its first two moments exactly; its interval is that of the lognormal with these moments
//! (Fenton 1960, *IRE Trans. Communications Systems* 8, 57-67).

use crate::results::State;
use crate::smoother::Smoothed;

/// Largest logarithm that is taken back without overflow.
pub(crate) const LARGEST: f64 = 700.0;

/// exp that saturates instead of overflowing; NaN (missing) stays NaN, which `min` would not.
pub(crate) fn exp(x: f64) -> f64 {
    if x > LARGEST { LARGEST.exp() } else { x.exp() }
}

/// Which unit a component has on the data's scale.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Unit {
    /// The data's own (level, signal).
    Data,
    /// What multiplies the level under a log transform (season, cycle, effects).
    Factor,
    /// What is added to the logarithm each step (slope).
    Growth,
}

/// A smoothed component on the data's scale. `shift` and `unit` undo the working scale.
pub(crate) fn component(smoothed: &Smoothed, log: bool, unit: Unit, scale: f64, shift: f64) -> State {
    let mut state = State { value: Vec::new(), std_error: Vec::new() };
    for (m, v) in smoothed.mean.iter().zip(&smoothed.variance) {
        let shift = if unit == Unit::Data { shift } else { 0.0 };
        let (m, s) = (m * scale + shift, v.sqrt() * scale);
        // Under the logarithm standard errors are first-order: derivative of exp times the standard error.
        let (value, std_error) = match (log, unit) {
            (false, _) => (m, s),
            (true, Unit::Growth) => (exp(m) - 1.0, exp(m) * s),
            (true, _) => (exp(m), exp(m) * s),
        };
        state.value.push(value);
        state.std_error.push(std_error);
    }
    state
}

/// Mean and standard deviation of `exp(N(m, v))`.
pub(crate) fn lognormal(m: f64, v: f64) -> (f64, f64) {
    let mean = exp(m + 0.5 * v);
    (mean, mean * v.min(LARGEST).exp_m1().sqrt())
}

/// Parameters `(m, v)` of the lognormal with this mean and this variance over the squared mean.
pub(crate) fn lognormal_with_moments(mean: f64, relative_variance: f64) -> (f64, f64) {
    let v = relative_variance.max(0.0).ln_1p();
    (mean.ln() - 0.5 * v, v)
}
