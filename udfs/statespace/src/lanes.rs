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
mod registers;

pub(crate) use mask::Mask;
pub(crate) use real::Real;
pub(crate) use registers::Portable;
#[cfg(target_arch = "x86_64")]
pub(crate) use registers::{Avx2, Avx512};

use registers::Registers;
use std::marker::PhantomData;

use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

/// Most lanes of any [`Real`].
pub(crate) const MOST_LANES: usize = 8;

/// Eight numbers, one a lane. `I` are the registers they are worked on in: a register of AVX-512, two of AVX2, or what the compiler makes
/// of a loop over eight. All give the same bits.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
#[repr(C, align(64))]
pub(crate) struct Lanes<I>([f64; MOST_LANES], PhantomData<I>);

impl<I> Lanes<I> {
    #[inline(always)]
    fn of(numbers: [f64; MOST_LANES]) -> Self {
        Self(numbers, PhantomData)
    }
}

macro_rules! operator {
    ($operation:ident, $function:ident) => {
        impl<I: Registers> $operation for Lanes<I> {
            type Output = Self;
            #[inline(always)]
            fn $function(self, other: Self) -> Self {
                Self::of(I::$function(self.0, other.0))
            }
        }
    };
    ($operation:ident, $function:ident, $assign:ident, $assigned:ident) => {
        operator!($operation, $function);
        impl<I: Registers> $assign for Lanes<I> {
            #[inline(always)]
            fn $assigned(&mut self, other: Self) {
                self.0 = I::$function(self.0, other.0);
            }
        }
    };
}

operator!(Add, add, AddAssign, add_assign);
operator!(Sub, sub, SubAssign, sub_assign);
operator!(Mul, mul, MulAssign, mul_assign);
operator!(Div, div);

impl<I: Registers> Neg for Lanes<I> {
    type Output = Self;
    #[inline(always)]
    fn neg(self) -> Self {
        Self::of(I::neg(self.0))
    }
}

impl<I: Registers> Real for Lanes<I> {
    const LANES: usize = MOST_LANES;

    #[inline(always)]
    fn splat(x: f64) -> Self {
        Self::of([x; MOST_LANES])
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
        Self::of(I::sqrt(self.0))
    }

    #[inline(always)]
    fn abs(self) -> Self {
        Self::of(I::abs(self.0))
    }

    #[inline(always)]
    fn above(self, other: Self) -> Mask {
        Mask(I::above(self.0, other.0))
    }

    #[inline(always)]
    fn select(mask: Mask, yes: Self, no: Self) -> Self {
        Self::of(I::select(mask.0, yes.0, no.0))
    }
}
