//! Sine and cosine of eight numbers at once.
//!
//! x is reduced by the nearest multiple n of a quarter turn, which is subtracted in three parts of 33 bits and a rest
//! (W. J. Cody and W. Waite, Software Manual for the Elementary Functions (1980)), exact for |n| below 2^20; both functions are then
//! series on [-1/8, 1/8] turn whose first term left out is below 1e-17. Beyond 1e6 rad, and where x is not finite, every lane takes the
//! standard library's. Tested against it: below 1.5 units of the last place of 1.

use super::lane::{Eight, Lane, Simd};
use crate::units::QUARTER_TURN_RAD;

/// Largest argument that the lanes reduce by themselves, rad.
const LARGEST_RAD: f64 = 1e6;

/// A quarter turn in parts of 33 bits, so that each times n is exact, and the rest.
const PARTS: [f64; 3] = QUARTER_TURN_RAD;

/// x - x^3/6 + ...: coefficients of x^3, x^5 .. over the ones before.
const SINE: [f64; 7] =
    [-1.0 / 6.0, 1.0 / 120.0, -1.0 / 5040.0, 1.0 / 362_880.0, -1.0 / 39_916_800.0, 1.0 / 6_227_020_800.0, -1.0 / 1_307_674_368_000.0];

/// 1 - x^2/2 + ...
const COSINE: [f64; 8] = [
    -0.5,
    1.0 / 24.0,
    -1.0 / 720.0,
    1.0 / 40_320.0,
    -1.0 / 3_628_800.0,
    1.0 / 479_001_600.0,
    -1.0 / 87_178_291_200.0,
    1.0 / 20_922_789_888_000.0,
];

/// Sine and cosine of x, rad.
#[inline(always)]
pub(crate) fn sin_cos<S: Simd>(simd: S, x: S::V) -> (S::V, S::V) {
    let mut plain = Eight::all(0.0);
    x.store(&mut plain);
    if !plain.0.iter().all(|x| x.abs() <= LARGEST_RAD) {
        return by_library(simd, &plain);
    }
    let n = (x * simd.splat(1.0 / (PARTS[0] + PARTS[1]))).round();
    let r = x.minus(n, simd.splat(PARTS[0])).minus(n, simd.splat(PARTS[1])).minus(n, simd.splat(PARTS[2]));
    let z = r * r;
    let sine = r.plus(r * z, series(simd, z, &SINE));
    let cosine = simd.splat(1.0).plus(z, series(simd, z, &COSINE));
    // n modulo 4 is 0, 1, 2 or 3
    let quarter = n - (n * simd.splat(0.25) - simd.splat(0.375)).round() * simd.splat(4.0);
    let odd = quarter - (quarter * simd.splat(0.5) - simd.splat(0.25)).round() * simd.splat(2.0);
    let half = simd.splat(0.5);
    let (a, b) = (S::V::where_less(odd, half, sine, cosine), S::V::where_less(odd, half, cosine, sine));
    let s = S::V::where_less(quarter, simd.splat(1.5), a, -a);
    let c = S::V::where_less(quarter, half, b, S::V::where_less(quarter, simd.splat(2.5), -b, b));
    (s, c)
}

/// c[0] + c[1] z + ...
#[inline(always)]
pub(super) fn series<S: Simd, const N: usize>(simd: S, z: S::V, coefficients: &[f64; N]) -> S::V {
    let mut sum = simd.splat(coefficients[N - 1]);
    for k in (0..N - 1).rev() {
        sum = simd.splat(coefficients[k]).plus(z, sum);
    }
    sum
}

#[cold]
#[inline(never)]
fn of_library(x: &Eight) -> (Eight, Eight) {
    (Eight(x.0.map(f64::sin)), Eight(x.0.map(f64::cos)))
}

#[inline(always)]
fn by_library<S: Simd>(simd: S, x: &Eight) -> (S::V, S::V) {
    let (sine, cosine) = of_library(x);
    (simd.load(&sine), simd.load(&cosine))
}
