//! Eight doubles as one register: AVX-512.

use std::arch::x86_64::*;
use std::ops::{Add, Mul, Neg, Sub};

use super::lane::{Eight, Kernel, Lane, Simd};

/// Witness that the processor has AVX-512 (foundation and DQ); made in [`run`] alone.
#[derive(Clone, Copy)]
pub(crate) struct Avx512(());

/// One register of eight doubles. Holding one proves that a witness existed.
#[derive(Clone, Copy)]
pub(crate) struct Whole(__m512d);

/// Runs a kernel compiled for AVX-512. The processor must have its foundation and DQ.
#[target_feature(enable = "avx512f,avx512dq")]
pub(crate) fn run<K: Kernel>(kernel: K) -> K::Output {
    kernel.run(Avx512(()))
}

impl Simd for Avx512 {
    type V = Whole;

    #[inline(always)]
    fn splat(self, value: f64) -> Whole {
        // SAFETY: the witness exists, so the processor has AVX-512
        Whole(unsafe { _mm512_set1_pd(value) })
    }

    #[inline(always)]
    fn load(self, from: &Eight) -> Whole {
        // SAFETY: the witness exists; an `Eight` is 64 bytes on a boundary of 64
        Whole(unsafe { _mm512_load_pd(from.0.as_ptr()) })
    }
}

impl Add for Whole {
    type Output = Whole;
    #[inline(always)]
    fn add(self, other: Whole) -> Whole {
        // SAFETY: a `Whole` exists, so the processor has AVX-512
        Whole(unsafe { _mm512_add_pd(self.0, other.0) })
    }
}

impl Sub for Whole {
    type Output = Whole;
    #[inline(always)]
    fn sub(self, other: Whole) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_sub_pd(self.0, other.0) })
    }
}

impl Mul for Whole {
    type Output = Whole;
    #[inline(always)]
    fn mul(self, other: Whole) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_mul_pd(self.0, other.0) })
    }
}

impl Neg for Whole {
    type Output = Whole;
    #[inline(always)]
    fn neg(self) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_xor_pd(self.0, _mm512_set1_pd(-0.0)) })
    }
}

impl Lane for Whole {
    #[inline(always)]
    fn plus(self, a: Whole, b: Whole) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_fmadd_pd(a.0, b.0, self.0) })
    }

    #[inline(always)]
    fn minus(self, a: Whole, b: Whole) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_fnmadd_pd(a.0, b.0, self.0) })
    }

    #[inline(always)]
    fn over(self, other: Whole) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_div_pd(self.0, other.0) })
    }

    #[inline(always)]
    fn sqrt(self) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_sqrt_pd(self.0) })
    }

    #[inline(always)]
    fn round(self) -> Whole {
        // SAFETY: as above; 8 is "to nearest, no exception", with no bits kept behind the point
        Whole(unsafe { _mm512_roundscale_pd::<8>(self.0) })
    }

    #[inline(always)]
    fn where_less(a: Whole, b: Whole, then: Whole, otherwise: Whole) -> Whole {
        // SAFETY: as above
        Whole(unsafe { _mm512_mask_blend_pd(_mm512_cmp_pd_mask::<_CMP_LT_OQ>(a.0, b.0), otherwise.0, then.0) })
    }

    #[inline(always)]
    fn store(self, into: &mut Eight) {
        // SAFETY: as above; an `Eight` is 64 bytes on a boundary of 64
        unsafe { _mm512_store_pd(into.0.as_mut_ptr(), self.0) }
    }
}
