//! The blocks of two states as operations on a pair of numbers, and their transposes.
//!
//! Types of their own and not closures: what runs in the kernel's loops must be inlined for certain.

use crate::lanes::Real;

/// An operation on a pair.
pub(super) trait OnPair<V>: Copy {
    fn apply(self, a: V, b: V) -> (V, V);
}

/// `[1 1; 0 1]`.
#[derive(Debug, Clone, Copy)]
pub(super) struct Line;
/// Its transpose.
#[derive(Debug, Clone, Copy)]
pub(super) struct LineBack;
/// `[1 1; 0 d]`.
#[derive(Debug, Clone, Copy)]
pub(super) struct Damped<V>(pub(super) V);
/// Its transpose.
#[derive(Debug, Clone, Copy)]
pub(super) struct DampedBack<V>(pub(super) V);
/// `[c s; -s c]`.
#[derive(Debug, Clone, Copy)]
pub(super) struct Turn<V>(pub(super) V, pub(super) V);
/// Its transpose.
#[derive(Debug, Clone, Copy)]
pub(super) struct TurnBack<V>(pub(super) V, pub(super) V);

impl<V: Real> OnPair<V> for Line {
    #[inline(always)]
    fn apply(self, a: V, b: V) -> (V, V) {
        (a + b, b)
    }
}

impl<V: Real> OnPair<V> for LineBack {
    #[inline(always)]
    fn apply(self, a: V, b: V) -> (V, V) {
        (a, a + b)
    }
}

impl<V: Real> OnPair<V> for Damped<V> {
    #[inline(always)]
    fn apply(self, a: V, b: V) -> (V, V) {
        (a + b, b * self.0)
    }
}

impl<V: Real> OnPair<V> for DampedBack<V> {
    #[inline(always)]
    fn apply(self, a: V, b: V) -> (V, V) {
        (a, a + self.0 * b)
    }
}

impl<V: Real> OnPair<V> for Turn<V> {
    #[inline(always)]
    fn apply(self, a: V, b: V) -> (V, V) {
        let Self(cos, sin) = self;
        (cos * a + sin * b, cos * b - sin * a)
    }
}

impl<V: Real> OnPair<V> for TurnBack<V> {
    #[inline(always)]
    fn apply(self, a: V, b: V) -> (V, V) {
        let Self(cos, sin) = self;
        (cos * a - sin * b, cos * b + sin * a)
    }
}
