//! Several series side by side: a number of the kernel is one `f64`, or one for each of eight series.
//!
//! Everything that runs along a series (filter, smoother, score, information) is written once over [`Real`]. With `f64` it
//! advances one series; with [`Lanes`] it advances eight that share a structure, each element of a vector register being another series.
//! An operation acts on each lane alone and in the same order whatever the type, and no multiplication is fused with an
//! addition, so that the numbers of a series are the same to the last bit in any lane, beside any neighbours and with any
//! instruction set (IEEE 754 fixes the result of `+ - * /` and the square root). What depends on the data of one series (a missing point, a
//! covariance that has settled, a collapse) is decided lane by lane, with a [`Mask`].

mod mask;
mod real;

pub(crate) use mask::Mask;
pub(crate) use real::Real;

use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

/// Most lanes of any [`Real`].
pub(crate) const MOST_LANES: usize = 8;

/// Eight numbers, one a lane: a register of AVX-512, two of AVX2, four of SSE2 or NEON.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
#[repr(C, align(64))]
pub(crate) struct Lanes([f64; MOST_LANES]);

impl Lanes {
    #[inline(always)]
    fn each(self, f: impl Fn(f64) -> f64) -> Self {
        let mut out = self.0;
        for x in &mut out {
            *x = f(*x);
        }
        Self(out)
    }

    #[inline(always)]
    fn both(self, other: Self, f: impl Fn(f64, f64) -> f64) -> Self {
        let mut out = self.0;
        for i in 0..MOST_LANES {
            out[i] = f(out[i], other.0[i]);
        }
        Self(out)
    }
}

macro_rules! operator {
    ($operation:ident, $function:ident, $assign:ident, $assigned:ident, $symbol:tt) => {
        impl $operation for Lanes {
            type Output = Self;
            #[inline(always)]
            fn $function(self, other: Self) -> Self {
                self.both(other, |a, b| a $symbol b)
            }
        }
        impl $assign for Lanes {
            #[inline(always)]
            fn $assigned(&mut self, other: Self) {
                *self = *self $symbol other;
            }
        }
    };
}

operator!(Add, add, AddAssign, add_assign, +);
operator!(Sub, sub, SubAssign, sub_assign, -);
operator!(Mul, mul, MulAssign, mul_assign, *);

impl Div for Lanes {
    type Output = Self;
    #[inline(always)]
    fn div(self, other: Self) -> Self {
        self.both(other, |a, b| a / b)
    }
}

impl Neg for Lanes {
    type Output = Self;
    #[inline(always)]
    fn neg(self) -> Self {
        self.each(|a| -a)
    }
}

impl Real for Lanes {
    const LANES: usize = MOST_LANES;

    #[inline(always)]
    fn splat(x: f64) -> Self {
        Self([x; MOST_LANES])
    }

    #[inline(always)]
    fn lane(self, lane: usize) -> f64 {
        self.0[lane]
    }

    #[inline(always)]
    fn set_lane(&mut self, lane: usize, x: f64) {
        self.0[lane] = x;
    }

    #[inline(always)]
    fn sqrt(self) -> Self {
        self.each(f64::sqrt)
    }

    #[inline(always)]
    fn abs(self) -> Self {
        self.each(f64::abs)
    }

    #[inline(always)]
    fn above(self, other: Self) -> Mask {
        let mut bits = 0;
        for i in 0..MOST_LANES {
            bits |= u8::from(self.0[i] > other.0[i]) << i;
        }
        Mask(bits)
    }

    #[inline(always)]
    fn select(mask: Mask, yes: Self, no: Self) -> Self {
        let mut out = no.0;
        for i in 0..MOST_LANES {
            if mask.0 >> i & 1 == 1 {
                out[i] = yes.0[i];
            }
        }
        Self(out)
    }
}
