//! From the data's scale to the model's and back.
//!
//! Logarithm: if `x ~ N(m, v)` then `exp(x)` has the quantiles `exp(m + z sqrt(v))` exactly, mean `exp(m + v/2)` and
//! variance `mean^2 (exp(v) - 1)` (Johnson, Kotz & Balakrishnan 1994, *Continuous Univariate Distributions* 1, ch. 14).
//! `log1p` is the logarithm of `1 + y`, for series with zeros. Box & Cox (1964), *JRSS B* 26, 211-252, eq. (1):
//! `(y^lambda - 1) / lambda`, the logarithm at 0; its inverse is zero below `-1 / lambda`, where no observation can come from,
//! and its moments are integrals over the normal law ([`crate::normal_law`]).

use crate::normal_law;
use crate::results::State;
use crate::smoother::Smoothed;

/// Largest logarithm that is taken back without overflow.
pub(crate) const LARGEST: f64 = 700.0;

/// Largest power of the Box-Cox family that is offered.
pub(crate) const LARGEST_POWER: f64 = 2.0;

/// The scale on which a series is modelled.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Transform {
    /// The data as they are.
    #[default]
    None,
    /// Natural logarithm; every value above zero.
    Log,
    /// Natural logarithm of one plus the value; every value above -1.
    Log1p,
    /// Box-Cox with this power, from 0 to 2; values above zero, or zero where the power is above zero.
    BoxCox(f64),
}

impl Transform {
    /// Its word in `transform => …`; the power of Box-Cox stands beside it ([`Self::power`]).
    pub fn name(self) -> &'static str {
        match self {
            Self::None => "none",
            Self::Log => "log",
            Self::Log1p => "log1p",
            Self::BoxCox(_) => "box-cox",
        }
    }

    /// The power of a Box-Cox transform.
    pub fn power(self) -> Option<f64> {
        match self {
            Self::BoxCox(power) => Some(power),
            _ => None,
        }
    }

    /// True where level and components multiply on the data's scale: seasons and effects are factors.
    pub fn multiplies(self) -> bool {
        matches!(self, Self::Log | Self::Log1p)
    }

    /// The smallest value that can be transformed, and whether it can itself.
    pub(crate) fn lower_end(self) -> Option<(f64, bool)> {
        match self {
            Self::None => None,
            Self::Log => Some((0.0, false)),
            Self::Log1p => Some((-1.0, false)),
            Self::BoxCox(power) => Some((0.0, power > 0.0)),
        }
    }

    /// The first value of a series that cannot be transformed.
    pub(crate) fn refuses(self, observed: &[f64]) -> Option<usize> {
        let (end, included) = self.lower_end()?;
        observed.iter().position(|&y| y < end || (y == end && !included))
    }

    /// A value on the model scale; NaN stays NaN.
    pub fn forward(self, y: f64) -> f64 {
        match self {
            Self::None => y,
            Self::Log => y.ln(),
            Self::Log1p => y.ln_1p(),
            Self::BoxCox(0.0) => y.ln(),
            Self::BoxCox(1.0) => y - 1.0,
            // expm1 keeps the digits of small powers.
            Self::BoxCox(power) if y > 0.0 => (power * y.ln()).exp_m1() / power,
            Self::BoxCox(power) => {
                if y == 0.0 {
                    -1.0 / power
                } else {
                    f64::NAN
                }
            }
        }
    }

    /// A value of the model scale on the data's; saturates instead of overflowing, NaN stays NaN.
    pub fn back(self, x: f64) -> f64 {
        match self {
            Self::None => x,
            Self::Log => exp(x),
            Self::Log1p => {
                if x > LARGEST {
                    exp(x)
                } else {
                    x.exp_m1()
                }
            }
            Self::BoxCox(0.0) => exp(x),
            Self::BoxCox(1.0) => {
                if x < -1.0 {
                    0.0
                } else {
                    x + 1.0
                }
            }
            Self::BoxCox(power) => {
                let inside = power * x;
                if inside <= -1.0 { 0.0 } else { exp(inside.ln_1p() / power) }
            }
        }
    }

    /// Derivative of [`Self::back`].
    fn slope(self, x: f64) -> f64 {
        match self {
            Self::None => 1.0,
            Self::Log | Self::Log1p => exp(x),
            Self::BoxCox(power) => {
                let y = self.back(x);
                // At zero a root has no slope to speak of.
                if power == 1.0 {
                    1.0
                } else if y > 0.0 {
                    y.powf(1.0 - power)
                } else {
                    f64::NAN
                }
            }
        }
    }

    /// Mean and standard deviation of the back-transformed `N(m, v)`.
    pub(crate) fn moments(self, m: f64, v: f64) -> (f64, f64) {
        match self {
            Self::None => (m, v.sqrt()),
            Self::Log => lognormal(m, v),
            Self::Log1p => {
                let (mean, sd) = lognormal(m, v);
                (mean - 1.0, sd)
            }
            Self::BoxCox(0.0) => lognormal(m, v),
            Self::BoxCox(_) => normal_law::moments(m, v, self.kink(), |x| self.back(x)),
        }
    }

    /// The model-scale value at and below which the data's scale is zero.
    pub(crate) fn kink(self) -> f64 {
        match self {
            Self::BoxCox(power) if power > 0.0 => -1.0 / power,
            _ => f64::NEG_INFINITY,
        }
    }

    /// True when the back-transformed `N(m, v)` and its upper quantile at `z` are in range.
    pub(crate) fn in_range(self, m: f64, v: f64, z: f64) -> bool {
        let s = v.sqrt();
        match self {
            Self::None => true,
            Self::Log | Self::Log1p => !(v > LARGEST || m + (z * s).max(0.5 * v) > LARGEST),
            Self::BoxCox(0.0) => Self::Log.in_range(m, v, z),
            Self::BoxCox(power) => (power * (m + z.max(9.0) * s)).max(0.0).ln_1p() / power < LARGEST,
        }
    }

    /// What is left of an observation beside its signal, both on the data's scale; `x` and `signal` the same on the model's.
    pub(crate) fn irregular(self, (y, fitted): (f64, f64), (x, signal): (f64, f64)) -> f64 {
        match self {
            Self::None => y - fitted,
            Self::Log => y / fitted,
            Self::Log1p => (1.0 + y) / (1.0 + fitted),
            Self::BoxCox(_) => x - signal,
        }
    }

    /// A smoothed component on the data's scale. `scale` and `shift` undo the working scale.
    pub(crate) fn component(self, smoothed: &Smoothed, unit: Unit, scale: f64, shift: f64) -> State {
        let mut state = State { value: Vec::new(), std_error: Vec::new() };
        for (m, v) in smoothed.mean.iter().zip(&smoothed.variance) {
            let shift = if unit == Unit::Data { shift } else { 0.0 };
            let (m, s) = (m * scale + shift, v.sqrt() * scale);
            // Standard errors are first-order: derivative of the way back times the standard error.
            let (value, std_error) = match unit {
                Unit::Data => (self.back(m), self.slope(m) * s),
                Unit::Growth if self.multiplies() => (exp(m) - 1.0, exp(m) * s),
                Unit::Factor if self.multiplies() => (exp(m), exp(m) * s),
                Unit::Growth | Unit::Factor => (m, s),
            };
            state.value.push(value);
            state.std_error.push(std_error);
        }
        state
    }
}

/// exp that saturates instead of overflowing; NaN (missing) stays NaN, which `min` would not.
fn exp(x: f64) -> f64 {
    if x > LARGEST { LARGEST.exp() } else { x.exp() }
}

/// Which unit a component has on the data's scale.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Unit {
    /// The data's own (level, signal).
    Data,
    /// What multiplies the level under a logarithm (season, cycle, effects).
    Factor,
    /// What is added to the logarithm each step (slope).
    Growth,
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
