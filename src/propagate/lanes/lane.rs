//! What a kernel may do with eight doubles side by side, whatever the processor calls them.
//!
//! A [`Simd`] is a witness that the processor has the instructions: the only way to make lanes from numbers, and made only where
//! that was checked. Every [`Lane`] comes from a witness, so the arithmetic on lanes needs no further check.

use std::ops::{Add, Mul, Neg, Sub};

/// Eight doubles in memory, on the boundary that the widest load likes.
#[derive(Debug, Clone, Copy, PartialEq)]
#[repr(C, align(64))]
pub struct Eight(pub [f64; 8]);

impl Eight {
    /// The same number eight times.
    pub const fn all(value: f64) -> Eight {
        Eight([value; 8])
    }
}

/// A set of instructions that this processor has.
pub(crate) trait Simd: Copy {
    /// Its eight doubles.
    type V: Lane;
    /// The same number in every lane.
    fn splat(self, value: f64) -> Self::V;
    /// Eight numbers from memory.
    fn load(self, from: &Eight) -> Self::V;
}

/// Eight doubles. Where the processor has no fused multiply-add, `plus` and `minus` round twice.
pub(crate) trait Lane: Copy + Add<Output = Self> + Sub<Output = Self> + Mul<Output = Self> + Neg<Output = Self> {
    /// self + a b.
    fn plus(self, a: Self, b: Self) -> Self;
    /// self - a b.
    fn minus(self, a: Self, b: Self) -> Self;
    /// self / other.
    fn over(self, other: Self) -> Self;
    /// Square root.
    fn sqrt(self) -> Self;
    /// Nearest whole number, ties to even.
    fn round(self) -> Self;
    /// Where a < b `then`, elsewhere (also where either is not a number) `otherwise`.
    fn where_less(a: Self, b: Self, then: Self, otherwise: Self) -> Self;
    /// Into memory.
    fn store(self, into: &mut Eight);
}

/// Work that is written once and compiled for every set of instructions.
pub(crate) trait Kernel {
    /// What it gives.
    type Output;
    /// Does it; an implementation is `#[inline(always)]`, so that it takes over the instructions of its caller.
    fn run<S: Simd>(self, simd: S) -> Self::Output;
}
