//! Eight doubles as two registers of four: AVX2 with fused multiply-add.

use std::arch::x86_64::*;
use std::ops::{Add, Mul, Neg, Sub};

use super::lane::{Eight, Kernel, Lane, Simd};

/// Witness that the processor has AVX2 and FMA; made in [`run`] alone.
#[derive(Clone, Copy)]
pub(crate) struct Avx2(());

/// Two registers of four doubles. Holding one proves that a witness existed.
#[derive(Clone, Copy)]
pub(crate) struct Pair(__m256d, __m256d);

/// Runs a kernel compiled for AVX2 and FMA. The processor must have both.
#[target_feature(enable = "avx2,fma")]
pub(crate) fn run<K: Kernel>(kernel: K) -> K::Output {
    kernel.run(Avx2(()))
}

impl Simd for Avx2 {
    type V = Pair;

    #[inline(always)]
    fn splat(self, value: f64) -> Pair {
        // SAFETY: the witness exists, so the processor has AVX2
        let one = unsafe { _mm256_set1_pd(value) };
        Pair(one, one)
    }

    #[inline(always)]
    fn load(self, from: &Eight) -> Pair {
        // SAFETY: the witness exists; an `Eight` is 64 bytes on a boundary of 64, so both halves may be loaded aligned
        unsafe { Pair(_mm256_load_pd(from.0.as_ptr()), _mm256_load_pd(from.0.as_ptr().add(4))) }
    }
}

impl Add for Pair {
    type Output = Pair;
    #[inline(always)]
    fn add(self, other: Pair) -> Pair {
        // SAFETY: a `Pair` exists, so the processor has AVX2
        unsafe { Pair(_mm256_add_pd(self.0, other.0), _mm256_add_pd(self.1, other.1)) }
    }
}

impl Sub for Pair {
    type Output = Pair;
    #[inline(always)]
    fn sub(self, other: Pair) -> Pair {
        // SAFETY: as above
        unsafe { Pair(_mm256_sub_pd(self.0, other.0), _mm256_sub_pd(self.1, other.1)) }
    }
}

impl Mul for Pair {
    type Output = Pair;
    #[inline(always)]
    fn mul(self, other: Pair) -> Pair {
        // SAFETY: as above
        unsafe { Pair(_mm256_mul_pd(self.0, other.0), _mm256_mul_pd(self.1, other.1)) }
    }
}

impl Neg for Pair {
    type Output = Pair;
    #[inline(always)]
    fn neg(self) -> Pair {
        // SAFETY: as above
        unsafe {
            let sign = _mm256_set1_pd(-0.0);
            Pair(_mm256_xor_pd(self.0, sign), _mm256_xor_pd(self.1, sign))
        }
    }
}

impl Lane for Pair {
    #[inline(always)]
    fn plus(self, a: Pair, b: Pair) -> Pair {
        // SAFETY: a `Pair` exists, so the processor has FMA
        unsafe { Pair(_mm256_fmadd_pd(a.0, b.0, self.0), _mm256_fmadd_pd(a.1, b.1, self.1)) }
    }

    #[inline(always)]
    fn minus(self, a: Pair, b: Pair) -> Pair {
        // SAFETY: as above
        unsafe { Pair(_mm256_fnmadd_pd(a.0, b.0, self.0), _mm256_fnmadd_pd(a.1, b.1, self.1)) }
    }

    #[inline(always)]
    fn over(self, other: Pair) -> Pair {
        // SAFETY: as above
        unsafe { Pair(_mm256_div_pd(self.0, other.0), _mm256_div_pd(self.1, other.1)) }
    }

    #[inline(always)]
    fn sqrt(self) -> Pair {
        // SAFETY: as above
        unsafe { Pair(_mm256_sqrt_pd(self.0), _mm256_sqrt_pd(self.1)) }
    }

    #[inline(always)]
    fn round(self) -> Pair {
        const NEAREST: i32 = _MM_FROUND_TO_NEAREST_INT | _MM_FROUND_NO_EXC;
        // SAFETY: as above
        unsafe { Pair(_mm256_round_pd::<NEAREST>(self.0), _mm256_round_pd::<NEAREST>(self.1)) }
    }

    #[inline(always)]
    fn where_less(a: Pair, b: Pair, then: Pair, otherwise: Pair) -> Pair {
        // SAFETY: as above
        unsafe {
            let (low, high) = (_mm256_cmp_pd::<_CMP_LT_OQ>(a.0, b.0), _mm256_cmp_pd::<_CMP_LT_OQ>(a.1, b.1));
            Pair(_mm256_blendv_pd(otherwise.0, then.0, low), _mm256_blendv_pd(otherwise.1, then.1, high))
        }
    }

    #[inline(always)]
    fn store(self, into: &mut Eight) {
        // SAFETY: as above; an `Eight` is 64 bytes on a boundary of 64
        unsafe {
            _mm256_store_pd(into.0.as_mut_ptr(), self.0);
            _mm256_store_pd(into.0.as_mut_ptr().add(4), self.1);
        }
    }
}
