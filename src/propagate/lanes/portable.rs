//! Eight doubles as an array: what the compiler makes of it on any processor.

use std::ops::{Add, Mul, Neg, Sub};

use super::lane::{Eight, Lane, Simd};

/// No instructions beyond the target's own.
#[derive(Clone, Copy)]
pub(crate) struct Portable;

/// An array of eight.
#[derive(Clone, Copy)]
pub(crate) struct Array([f64; 8]);

impl Simd for Portable {
    type V = Array;

    #[inline(always)]
    fn splat(self, value: f64) -> Array {
        Array([value; 8])
    }

    #[inline(always)]
    fn load(self, from: &Eight) -> Array {
        Array(from.0)
    }
}

#[inline(always)]
fn zip(a: Array, b: Array, f: impl Fn(f64, f64) -> f64) -> Array {
    Array(std::array::from_fn(|k| f(a.0[k], b.0[k])))
}

impl Add for Array {
    type Output = Array;
    #[inline(always)]
    fn add(self, other: Array) -> Array {
        zip(self, other, |a, b| a + b)
    }
}

impl Sub for Array {
    type Output = Array;
    #[inline(always)]
    fn sub(self, other: Array) -> Array {
        zip(self, other, |a, b| a - b)
    }
}

impl Mul for Array {
    type Output = Array;
    #[inline(always)]
    fn mul(self, other: Array) -> Array {
        zip(self, other, |a, b| a * b)
    }
}

impl Neg for Array {
    type Output = Array;
    #[inline(always)]
    fn neg(self) -> Array {
        Array(self.0.map(|a| -a))
    }
}

impl Lane for Array {
    #[inline(always)]
    fn plus(self, a: Array, b: Array) -> Array {
        self + a * b
    }

    #[inline(always)]
    fn minus(self, a: Array, b: Array) -> Array {
        self - a * b
    }

    #[inline(always)]
    fn over(self, other: Array) -> Array {
        zip(self, other, |a, b| a / b)
    }

    #[inline(always)]
    fn sqrt(self) -> Array {
        Array(self.0.map(f64::sqrt))
    }

    #[inline(always)]
    fn round(self) -> Array {
        // f64::round_ties_even is a call without SSE4.1; beyond 2^52 every number is whole
        const WHOLE: f64 = 4_503_599_627_370_496.0;
        Array(self.0.map(|a| {
            let magic = WHOLE.copysign(a);
            let near = (a + magic) - magic;
            if a.abs() < WHOLE {
                near
            } else {
                a
            }
        }))
    }

    #[inline(always)]
    fn where_less(a: Array, b: Array, then: Array, otherwise: Array) -> Array {
        Array(std::array::from_fn(|k| if a.0[k] < b.0[k] { then.0[k] } else { otherwise.0[k] }))
    }

    #[inline(always)]
    fn store(self, into: &mut Eight) {
        into.0 = self.0;
    }
}
