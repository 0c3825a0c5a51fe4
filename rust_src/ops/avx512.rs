//! Lanes of AVX-512F: eight `f64`.

use std::arch::x86_64::{
    __m512d, _mm256_loadu_ps, _mm256_storeu_ps, _mm512_add_pd, _mm512_cvtpd_ps, _mm512_cvtps_pd,
    _mm512_fmadd_pd, _mm512_fnmadd_pd, _mm512_loadu_pd, _mm512_mask_storeu_pd, _mm512_maskz_loadu_pd,
    _mm512_mul_pd, _mm512_reduce_add_pd, _mm512_set1_pd, _mm512_storeu_pd,
};

use super::lanes::Lanes;

/// Proof that the processor has AVX-512F.
#[derive(Clone, Copy, Debug)]
pub struct Avx512(());

impl Avx512 {
    /// The proof, where detection finds the instructions.
    pub(super) fn detect() -> Option<Self> {
        is_x86_feature_detected!("avx512f").then_some(Self(()))
    }
}

/// Mask of the first `count` lanes.
#[inline(always)]
fn first(count: usize) -> u8 {
    0xff >> (8 - count)
}

// SAFETY: each body is one intrinsic on eight lanes, or on the lanes of a mask of `count` bits; masked-out
// lanes are not accessed.
unsafe impl Lanes for Avx512 {
    type Register = __m512d;
    const WIDTH: usize = 8;

    #[inline(always)]
    fn splat(self, value: f64) -> __m512d {
        // SAFETY: `self` proves AVX-512F, here and in every method below.
        unsafe { _mm512_set1_pd(value) }
    }
    #[inline(always)]
    fn add(self, a: __m512d, b: __m512d) -> __m512d {
        // SAFETY: as in `splat`.
        unsafe { _mm512_add_pd(a, b) }
    }
    #[inline(always)]
    fn mul(self, a: __m512d, b: __m512d) -> __m512d {
        // SAFETY: as in `splat`.
        unsafe { _mm512_mul_pd(a, b) }
    }
    #[inline(always)]
    fn mul_add(self, a: __m512d, b: __m512d, c: __m512d) -> __m512d {
        // SAFETY: as in `splat`.
        unsafe { _mm512_fmadd_pd(a, b, c) }
    }
    #[inline(always)]
    fn mul_sub(self, a: __m512d, b: __m512d, c: __m512d) -> __m512d {
        // SAFETY: as in `splat`.
        unsafe { _mm512_fnmadd_pd(a, b, c) }
    }
    #[inline(always)]
    fn sum(self, a: __m512d) -> f64 {
        // SAFETY: as in `splat`.
        unsafe { _mm512_reduce_add_pd(a) }
    }
    #[inline(always)]
    unsafe fn load64(self, source: *const f64) -> __m512d {
        // SAFETY: as in `splat`, and the caller vouches for eight entries.
        unsafe { _mm512_loadu_pd(source) }
    }
    #[inline(always)]
    unsafe fn load64_part(self, source: *const f64, count: usize) -> __m512d {
        // SAFETY: as in `splat`, and the caller vouches for `count` entries: the mask admits no others.
        unsafe { _mm512_maskz_loadu_pd(first(count), source) }
    }
    #[inline(always)]
    unsafe fn store64(self, target: *mut f64, a: __m512d) {
        // SAFETY: as in `load64`, to write.
        unsafe { _mm512_storeu_pd(target, a) }
    }
    #[inline(always)]
    unsafe fn store64_part(self, target: *mut f64, a: __m512d, count: usize) {
        // SAFETY: as in `load64_part`, to write.
        unsafe { _mm512_mask_storeu_pd(target, first(count), a) }
    }
    #[inline(always)]
    unsafe fn load32(self, source: *const f32) -> __m512d {
        // SAFETY: as in `load64`; AVX, which AVX-512F implies, loads the half register.
        unsafe { _mm512_cvtps_pd(_mm256_loadu_ps(source)) }
    }
    #[inline(always)]
    unsafe fn store32(self, target: *mut f32, a: __m512d) {
        // SAFETY: as in `load32`, to write.
        unsafe { _mm256_storeu_ps(target, _mm512_cvtpd_ps(a)) }
    }
}
