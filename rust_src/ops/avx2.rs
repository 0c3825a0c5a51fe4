//! Lanes of AVX2 with FMA: four `f64`.

use std::arch::x86_64::{
    __m256d, __m256i, _mm_add_pd, _mm_add_sd, _mm_cvtsd_f64, _mm_loadu_ps, _mm_storeu_ps, _mm_unpackhi_pd,
    _mm256_add_pd, _mm256_castpd256_pd128, _mm256_cvtpd_ps, _mm256_cvtps_pd, _mm256_extractf128_pd,
    _mm256_fmadd_pd, _mm256_fnmadd_pd, _mm256_loadu_pd, _mm256_loadu_si256, _mm256_maskload_pd,
    _mm256_maskstore_pd, _mm256_mul_pd, _mm256_set1_pd, _mm256_storeu_pd,
};

use super::lanes::Lanes;

/// Proof that the processor has AVX2 and FMA.
#[derive(Clone, Copy, Debug)]
pub struct Avx2(());

impl Avx2 {
    /// The proof, where detection finds the instructions.
    pub(super) fn detect() -> Option<Self> {
        (is_x86_feature_detected!("avx2") && is_x86_feature_detected!("fma")).then_some(Self(()))
    }
}

/// From `MASKS[4 - count]` on, `count` set entries and then clear ones.
const MASKS: [i64; 8] = [-1, -1, -1, -1, 0, 0, 0, 0];

/// Mask of the first `count <= 4` lanes.
#[inline(always)]
fn first(count: usize) -> __m256i {
    let from = MASKS[4 - count..].as_ptr();
    // SAFETY: at most four entries are skipped of eight, so four are left; only an `Avx2` method calls this.
    unsafe { _mm256_loadu_si256(from.cast()) }
}

// SAFETY: each body is one intrinsic on four lanes, or on the lanes of a mask of `count` entries; masked-out
// lanes are not accessed.
unsafe impl Lanes for Avx2 {
    type Register = __m256d;
    const WIDTH: usize = 4;

    #[inline(always)]
    fn splat(self, value: f64) -> __m256d {
        // SAFETY: `self` proves AVX2 and FMA, here and in every method below.
        unsafe { _mm256_set1_pd(value) }
    }
    #[inline(always)]
    fn add(self, a: __m256d, b: __m256d) -> __m256d {
        // SAFETY: as in `splat`.
        unsafe { _mm256_add_pd(a, b) }
    }
    #[inline(always)]
    fn mul(self, a: __m256d, b: __m256d) -> __m256d {
        // SAFETY: as in `splat`.
        unsafe { _mm256_mul_pd(a, b) }
    }
    #[inline(always)]
    fn mul_add(self, a: __m256d, b: __m256d, c: __m256d) -> __m256d {
        // SAFETY: as in `splat`.
        unsafe { _mm256_fmadd_pd(a, b, c) }
    }
    #[inline(always)]
    fn mul_sub(self, a: __m256d, b: __m256d, c: __m256d) -> __m256d {
        // SAFETY: as in `splat`.
        unsafe { _mm256_fnmadd_pd(a, b, c) }
    }
    #[inline(always)]
    fn sum(self, a: __m256d) -> f64 {
        // SAFETY: as in `splat`; AVX2 implies AVX and SSE2.
        unsafe {
            let pairs = _mm_add_pd(_mm256_castpd256_pd128(a), _mm256_extractf128_pd::<1>(a));
            _mm_cvtsd_f64(_mm_add_sd(pairs, _mm_unpackhi_pd(pairs, pairs)))
        }
    }
    #[inline(always)]
    unsafe fn load64(self, source: *const f64) -> __m256d {
        // SAFETY: as in `splat`, and the caller vouches for four entries.
        unsafe { _mm256_loadu_pd(source) }
    }
    #[inline(always)]
    unsafe fn load64_part(self, source: *const f64, count: usize) -> __m256d {
        // SAFETY: as in `splat`, and the caller vouches for `count` entries: the mask admits no others.
        unsafe { _mm256_maskload_pd(source, first(count)) }
    }
    #[inline(always)]
    unsafe fn store64(self, target: *mut f64, a: __m256d) {
        // SAFETY: as in `load64`, to write.
        unsafe { _mm256_storeu_pd(target, a) }
    }
    #[inline(always)]
    unsafe fn store64_part(self, target: *mut f64, a: __m256d, count: usize) {
        // SAFETY: as in `load64_part`, to write.
        unsafe { _mm256_maskstore_pd(target, first(count), a) }
    }
    #[inline(always)]
    unsafe fn load32(self, source: *const f32) -> __m256d {
        // SAFETY: as in `load64`; SSE loads the half register.
        unsafe { _mm256_cvtps_pd(_mm_loadu_ps(source)) }
    }
    #[inline(always)]
    unsafe fn store32(self, target: *mut f32, a: __m256d) {
        // SAFETY: as in `load32`, to write.
        unsafe { _mm_storeu_ps(target, _mm256_cvtpd_ps(a)) }
    }
}
