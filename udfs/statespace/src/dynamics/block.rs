//! One diagonal block of the transition, with the numbers of every lane, and what it does to vectors and to covariances.
//!
//! Most blocks have two states and are one operation on a pair of numbers. Blocks that shift (dummy season, autoregression) expect a
//! covariance whose states have been shifted already: see [`Block::shifts`].

use std::ops::Range;

use super::packed::packed_at;
use super::pair::{Damped, DampedBack, Line, LineBack, OnPair, Turn, TurnBack};
use super::season;
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

    /// True when the states of the block move down by one place, the last to the front, before a congruence forward, and up by one, the
    /// first to the end, before one backward.
    #[inline(always)]
    pub(super) fn shifts(&self) -> bool {
        matches!(self, Self::Season(_) | Self::Autoregression(_))
    }

    /// `x <- T x` on the `len x width` rows of the block.
    #[inline(always)]
    pub(super) fn forward(&self, x: &mut [V], width: usize, spare: &mut [V]) {
        self.forward_columns(x, width, 0..width, spare);
    }

    /// The same on some columns alone; the others are zero.
    #[inline(always)]
    pub(super) fn forward_columns(&self, x: &mut [V], width: usize, columns: Range<usize>, spare: &mut [V]) {
        match self {
            Self::Keep => {}
            Self::Negate => x[columns].iter_mut().for_each(|x| *x = -*x),
            Self::Line => pairs(x, width, columns, Line),
            Self::Damped(damping) => pairs(x, width, columns, Damped(*damping)),
            Self::Rotate(cos, sin) => pairs(x, width, columns, Turn(*cos, *sin)),
            Self::Season(_) | Self::Autoregression(_) | Self::Matrix(..) => {
                if self.shifts() {
                    x.rotate_right(width);
                }
                for c in columns {
                    self.long_forward(x, |i| i * width + c, spare);
                }
            }
        }
    }

    /// `x <- T' x` on the `len x width` rows of the block.
    #[inline(always)]
    pub(super) fn backward(&self, x: &mut [V], width: usize, spare: &mut [V]) {
        match self {
            Self::Keep => {}
            Self::Negate => x.iter_mut().for_each(|x| *x = -*x),
            Self::Line => pairs(x, width, 0..width, LineBack),
            Self::Damped(damping) => pairs(x, width, 0..width, DampedBack(*damping)),
            Self::Rotate(cos, sin) => pairs(x, width, 0..width, TurnBack(*cos, *sin)),
            Self::Season(_) | Self::Autoregression(_) | Self::Matrix(..) => {
                if self.shifts() {
                    x.rotate_left(width);
                }
                for c in 0..width {
                    self.long_backward(x, |i| i * width + c, spare);
                }
            }
        }
    }

    /// `p <- E p E'` on a packed `m x m` matrix, `E` the operation of this block on its states from `first` on, its shift done already.
    #[inline(always)]
    pub(super) fn congruence(&self, p: &mut [V], first: usize, m: usize, spare: &mut [V], forward: bool) {
        match (self, forward) {
            (Self::Keep, _) => {}
            (Self::Negate, _) => {
                let start = packed_at(first, 0);
                p[start..start + first].iter_mut().for_each(|x| *x = -*x);
                for other in first + 1..m {
                    let at = packed_at(other, first);
                    p[at] = -p[at];
                }
            }
            (Self::Line, true) => pair_congruence(p, first, m, Line),
            (Self::Line, false) => pair_congruence(p, first, m, LineBack),
            (Self::Damped(damping), true) => pair_congruence(p, first, m, Damped(*damping)),
            (Self::Damped(damping), false) => pair_congruence(p, first, m, DampedBack(*damping)),
            (Self::Rotate(cos, sin), true) => pair_congruence(p, first, m, Turn(*cos, *sin)),
            (Self::Rotate(cos, sin), false) => pair_congruence(p, first, m, TurnBack(*cos, *sin)),
            (Self::Season(len), _) => season::congruence(p, first, *len, m, spare, forward),
            (Self::Autoregression(_) | Self::Matrix(..), _) => {
                self.long_congruence(p, first, m, spare, forward);
            }
        }
    }

    /// [`Self::congruence`] of a block of any length: strip by strip, then the block's own square, written out.
    #[inline(always)]
    fn long_congruence(&self, p: &mut [V], first: usize, m: usize, spare: &mut [V], forward: bool) {
        let len = self.len();
        let apply = |x: &mut [V], start: usize, step: usize, spare: &mut [V]| {
            let at = |i: usize| start + i * step;
            if forward { self.long_forward(x, at, spare) } else { self.long_backward(x, at, spare) }
        };
        let (square, spare) = spare.split_at_mut(len * len);
        for other in (0..first).chain(first + len..m) {
            let column = &mut square[..len];
            for (i, x) in column.iter_mut().enumerate() {
                *x = p[packed_at(first + i, other)];
            }
            apply(column, 0, 1, spare);
            for (i, x) in column.iter().enumerate() {
                p[packed_at(first + i, other)] = *x;
            }
        }
        for i in 0..len {
            for j in 0..=i {
                let value = p[packed_at(first + i, first + j)];
                square[i * len + j] = value;
                square[j * len + i] = value;
            }
        }
        for j in 0..len {
            apply(square, j, len, spare);
        }
        for i in 0..len {
            apply(square, i * len, 1, spare);
        }
        for i in 0..len {
            for j in 0..=i {
                p[packed_at(first + i, first + j)] = square[i * len + j];
            }
        }
    }

    /// `x <- T x` for the numbers at `at(0)`, `at(1)`, …, shifted already; blocks of more than two states.
    #[inline(always)]
    fn long_forward(&self, x: &mut [V], at: impl Fn(usize) -> usize, spare: &mut [V]) {
        match self {
            Self::Season(len) => {
                let mut sum = x[at(0)];
                for i in 1..*len {
                    sum += x[at(i)];
                }
                x[at(0)] = -sum;
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
            _ => {}
        }
    }

    /// `x <- T' x` likewise.
    #[inline(always)]
    fn long_backward(&self, x: &mut [V], at: impl Fn(usize) -> usize, spare: &mut [V]) {
        match self {
            Self::Season(len) => {
                let first = x[at(len - 1)];
                for i in 0..len - 1 {
                    x[at(i)] -= first;
                }
                x[at(len - 1)] = -first;
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
            _ => {}
        }
    }
}

/// The same operation on each pair of two rows.
#[inline(always)]
fn pairs<V: Real>(x: &mut [V], width: usize, columns: Range<usize>, of: impl OnPair<V>) {
    let (first, second) = x.split_at_mut(width);
    for (a, b) in first[columns.clone()].iter_mut().zip(&mut second[columns]) {
        (*a, *b) = of.apply(*a, *b);
    }
}

/// [`Block::congruence`] of a block of two states: on its two rows, on the pairs in the rows below, on its own three numbers.
#[inline(always)]
fn pair_congruence<V: Real>(p: &mut [V], first: usize, m: usize, of: impl OnPair<V>) {
    let start = packed_at(first, 0);
    let (above, below) = p[start..].split_at_mut(2 * first + 3);
    let (upper, lower) = above.split_at_mut(first + 1);
    for (a, b) in upper[..first].iter_mut().zip(&mut lower[..first]) {
        (*a, *b) = of.apply(*a, *b);
    }
    let (x, y, z) = (upper[first], lower[first], lower[first + 1]);
    let ((a0, a1), (b0, b1)) = (of.apply(x, y), of.apply(y, z));
    upper[first] = of.apply(a0, b0).0;
    (lower[first], lower[first + 1]) = of.apply(a1, b1);
    let mut rest = below;
    for other in first + 2..m {
        let (row, next) = rest.split_at_mut(other + 1);
        (row[first], row[first + 1]) = of.apply(row[first], row[first + 1]);
        rest = next;
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
