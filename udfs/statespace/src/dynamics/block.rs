//! One diagonal block of the transition, with the numbers of every lane, and what it does to a vector.
//!
//! A block changes `len` numbers in place, wherever they stand: a state's column in an array, a strip of a packed covariance. Blocks that
//! shift (dummy season, autoregression) expect the shift to have been done: the caller moves indices instead of sums, see
//! [`Block::shifts`].

use crate::lanes::Real;
use crate::system::Op;

/// [`Op`] with a number per lane.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Block<V> {
    /// `a' = a`.
    Keep,
    /// `a' = -a`.
    Negate,
    /// `level' = level + slope`, the slope stays.
    Line,
    /// The same with `slope' = damping * slope`.
    Damped(V),
    /// `s' = -(sum of the last len)`, after a shift.
    Season(usize),
    /// `[c s; -s c]`.
    Rotate(V, V),
    /// `x' = coefficients of the last len`, after a shift.
    Autoregression(Vec<V>),
    /// Any matrix, row-major.
    Matrix(usize, Vec<V>),
}

impl<V: Real> Block<V> {
    /// The block with the numbers of `op` in all lanes.
    pub(super) fn of(op: &Op) -> Self {
        match op {
            Op::Keep => Self::Keep,
            Op::Negate => Self::Negate,
            Op::Trend { damping } if *damping == 1.0 => Self::Line,
            Op::Trend { damping } => Self::Damped(V::splat(*damping)),
            Op::Season { len } => Self::Season(*len),
            Op::Rotate { cos, sin } => Self::Rotate(V::splat(*cos), V::splat(*sin)),
            Op::Autoregression { coefficients } => {
                Self::Autoregression(coefficients.iter().map(|&c| V::splat(c)).collect())
            }
            Op::Matrix { size, values } => Self::Matrix(*size, values.iter().map(|&x| V::splat(x)).collect()),
        }
    }

    /// Puts the numbers of `op` into one lane.
    pub(super) fn set_lane(&mut self, lane: usize, op: &Op) {
        match (&mut *self, op) {
            (Self::Damped(damping), Op::Trend { damping: x }) => damping.set_lane(lane, *x),
            (Self::Line, Op::Trend { damping }) if *damping != 1.0 => {
                let mut of_lanes = V::splat(1.0);
                of_lanes.set_lane(lane, *damping);
                *self = Self::Damped(of_lanes);
            }
            (Self::Rotate(cos, sin), Op::Rotate { cos: c, sin: s }) => {
                cos.set_lane(lane, *c);
                sin.set_lane(lane, *s);
            }
            (Self::Autoregression(of_lanes), Op::Autoregression { coefficients: x })
            | (Self::Matrix(_, of_lanes), Op::Matrix { values: x, .. }) => {
                of_lanes.iter_mut().zip(x).for_each(|(to, x)| to.set_lane(lane, *x));
            }
            _ => {}
        }
    }

    /// Number of states.
    #[inline(always)]
    pub(super) fn len(&self) -> usize {
        match self {
            Self::Keep | Self::Negate => 1,
            Self::Line | Self::Damped(_) | Self::Rotate(..) => 2,
            Self::Season(len) | Self::Matrix(len, _) => *len,
            Self::Autoregression(coefficients) => coefficients.len(),
        }
    }

    /// True when the states of the block move down by one place, the last to the front, before [`Self::forward`], and up by one, the first to
    /// the end, before [`Self::backward`].
    #[inline(always)]
    pub(super) fn shifts(&self) -> bool {
        matches!(self, Self::Season(_) | Self::Autoregression(_))
    }

    /// `x <- T x` for the numbers at `at(0)`, `at(1)`, …, shifted already.
    #[inline(always)]
    pub(super) fn forward(&self, x: &mut [V], at: impl Fn(usize) -> usize, spare: &mut [V]) {
        match self {
            Self::Keep => {}
            Self::Negate => x[at(0)] = -x[at(0)],
            Self::Line => {
                let slope = x[at(1)];
                x[at(0)] += slope;
            }
            Self::Damped(damping) => {
                let slope = x[at(1)];
                x[at(0)] += slope;
                x[at(1)] = slope * *damping;
            }
            Self::Season(len) => {
                let mut sum = x[at(0)];
                for i in 1..*len {
                    sum += x[at(i)];
                }
                x[at(0)] = -sum;
            }
            Self::Rotate(cos, sin) => {
                let (a, b) = (x[at(0)], x[at(1)]);
                x[at(0)] = *cos * a + *sin * b;
                x[at(1)] = *cos * b - *sin * a;
            }
            Self::Autoregression(coefficients) => {
                let order = coefficients.len();
                let mut new = coefficients[order - 1] * x[at(0)];
                for i in 1..order {
                    new += coefficients[i - 1] * x[at(i)];
                }
                x[at(0)] = new;
            }
            Self::Matrix(size, values) => multiply(x, at, spare, *size, |i, j| values[i * size + j]),
        }
    }

    /// `x <- T' x`, shifted already.
    #[inline(always)]
    pub(super) fn backward(&self, x: &mut [V], at: impl Fn(usize) -> usize, spare: &mut [V]) {
        match self {
            Self::Keep => {}
            Self::Negate => x[at(0)] = -x[at(0)],
            Self::Line => {
                let level = x[at(0)];
                x[at(1)] += level;
            }
            Self::Damped(damping) => {
                let level = x[at(0)];
                x[at(1)] = level + *damping * x[at(1)];
            }
            Self::Season(len) => {
                let first = x[at(len - 1)];
                for i in 0..len - 1 {
                    x[at(i)] -= first;
                }
                x[at(len - 1)] = -first;
            }
            Self::Rotate(cos, sin) => {
                let (a, b) = (x[at(0)], x[at(1)]);
                x[at(0)] = *cos * a - *sin * b;
                x[at(1)] = *cos * b + *sin * a;
            }
            Self::Autoregression(coefficients) => {
                let last = coefficients.len() - 1;
                let first = x[at(last)];
                for i in 0..last {
                    x[at(i)] += coefficients[i] * first;
                }
                x[at(last)] = coefficients[last] * first;
            }
            Self::Matrix(size, values) => multiply(x, at, spare, *size, |i, j| values[j * size + i]),
        }
    }
}

/// `x <- M x`; `spare` holds at least `size` numbers.
#[inline(always)]
fn multiply<V: Real>(
    x: &mut [V],
    at: impl Fn(usize) -> usize,
    spare: &mut [V],
    size: usize,
    element: impl Fn(usize, usize) -> V,
) {
    for (i, out) in spare[..size].iter_mut().enumerate() {
        let mut sum = element(i, 0) * x[at(0)];
        for j in 1..size {
            sum += element(i, j) * x[at(j)];
        }
        *out = sum;
    }
    for (i, out) in spare[..size].iter().enumerate() {
        x[at(i)] = *out;
    }
}
