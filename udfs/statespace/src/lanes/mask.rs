//! One truth value a lane.

use std::ops::{BitAnd, BitAndAssign, BitOr, BitOrAssign, Not};

use super::Real;

/// Bit `i` is the truth of lane `i`; bits above the last lane are zero in what [`Mask::all`] makes and mean nothing elsewhere.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(crate) struct Mask(pub(crate) u8);

impl Mask {
    /// True in no lane.
    pub(crate) const NONE: Self = Self(0);

    /// True in every lane of `V`.
    #[inline(always)]
    pub(crate) const fn all<V: Real>() -> Self {
        if V::LANES >= 8 { Self(0xFF) } else { Self((1 << V::LANES) - 1) }
    }

    /// True in this lane alone.
    #[inline(always)]
    pub(crate) const fn only(lane: usize) -> Self {
        Self(1 << lane)
    }

    /// True in every lane of `V`?
    #[inline(always)]
    pub(crate) fn is_all<V: Real>(self) -> bool {
        self & Self::all::<V>() == Self::all::<V>()
    }

    /// True in no lane?
    #[inline(always)]
    pub(crate) fn is_none(self) -> bool {
        self.0 == 0
    }

    /// The truth of one lane.
    #[inline(always)]
    pub(crate) fn holds(self, lane: usize) -> bool {
        self.0 >> lane & 1 == 1
    }

    /// The lanes where it is true, ascending.
    #[inline(always)]
    pub(crate) fn lanes(self) -> impl Iterator<Item = usize> {
        (0..8).filter(move |&lane| self.holds(lane))
    }
}

impl BitAnd for Mask {
    type Output = Self;
    #[inline(always)]
    fn bitand(self, other: Self) -> Self {
        Self(self.0 & other.0)
    }
}

impl BitOr for Mask {
    type Output = Self;
    #[inline(always)]
    fn bitor(self, other: Self) -> Self {
        Self(self.0 | other.0)
    }
}

impl BitAndAssign for Mask {
    #[inline(always)]
    fn bitand_assign(&mut self, other: Self) {
        self.0 &= other.0;
    }
}

impl BitOrAssign for Mask {
    #[inline(always)]
    fn bitor_assign(&mut self, other: Self) {
        self.0 |= other.0;
    }
}

impl Not for Mask {
    type Output = Self;
    #[inline(always)]
    fn not(self) -> Self {
        Self(!self.0)
    }
}
