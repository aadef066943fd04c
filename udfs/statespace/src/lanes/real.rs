//! What the kernel asks of a number.

use std::fmt::Debug;
use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

use super::Mask;

/// A number of the kernel: one `f64`, or one a lane. Arithmetic acts lane by lane.
pub(crate) trait Real:
    Copy
    + Debug
    + Default
    + PartialEq
    + Send
    + Sync
    + 'static
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Neg<Output = Self>
    + AddAssign
    + SubAssign
    + MulAssign
{
    /// Number of lanes, at most [`super::MOST_LANES`].
    const LANES: usize;

    /// The same number in every lane.
    fn splat(x: f64) -> Self;
    /// The number of one lane.
    fn lane(self, lane: usize) -> f64;
    /// Changes the number of one lane.
    fn set_lane(&mut self, lane: usize, x: f64);
    /// Square root.
    fn sqrt(self) -> Self;
    /// Magnitude.
    fn abs(self) -> Self;
    /// Where `self > other`; false where either is NaN.
    fn above(self, other: Self) -> Mask;
    /// `yes` where the mask holds, `no` elsewhere.
    fn select(mask: Mask, yes: Self, no: Self) -> Self;

    /// 0 in every lane.
    #[inline(always)]
    fn zero() -> Self {
        Self::splat(0.0)
    }

    /// The same function of the number of each lane in `mask`, one after another: for what no vector instruction does.
    #[inline(always)]
    fn in_lanes(self, mask: Mask, f: impl Fn(f64) -> f64) -> Self {
        let mut out = self;
        for lane in 0..Self::LANES {
            if mask.holds(lane) {
                out.set_lane(lane, f(self.lane(lane)));
            }
        }
        out
    }

    /// `self * x`, where `x` is the same for all lanes and often one.
    #[inline(always)]
    fn times(self, x: f64) -> Self {
        if x == 1.0 { self } else { self * Self::splat(x) }
    }
}

impl Real for f64 {
    const LANES: usize = 1;

    #[inline(always)]
    fn splat(x: f64) -> Self {
        x
    }

    #[inline(always)]
    fn lane(self, _lane: usize) -> f64 {
        self
    }

    #[inline(always)]
    fn set_lane(&mut self, _lane: usize, x: f64) {
        *self = x;
    }

    #[inline(always)]
    fn sqrt(self) -> Self {
        Self::sqrt(self)
    }

    #[inline(always)]
    fn abs(self) -> Self {
        Self::abs(self)
    }

    #[inline(always)]
    fn above(self, other: Self) -> Mask {
        Mask(u8::from(self > other))
    }

    #[inline(always)]
    fn select(mask: Mask, yes: Self, no: Self) -> Self {
        if mask.holds(0) { yes } else { no }
    }
}
