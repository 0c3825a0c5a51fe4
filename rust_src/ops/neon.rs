//! Lanes of NEON: two `f64`. Every AArch64 processor has them.

use std::arch::aarch64::{
    float64x2_t, vaddq_f64, vaddvq_f64, vcvt_f32_f64, vcvt_f64_f32, vdupq_n_f64, vfmaq_f64, vfmsq_f64,
    vld1_f32, vld1q_f64, vmulq_f64, vsetq_lane_f64, vst1_f32, vst1q_f64,
};

use super::lanes::Lanes;

/// Proof that the processor has NEON: part of the base instruction set.
#[derive(Clone, Copy, Debug)]
pub struct Neon;

// SAFETY: each body is one intrinsic on two lanes, or touches the first entry alone where `count` is 1.
unsafe impl Lanes for Neon {
    type Register = float64x2_t;
    const WIDTH: usize = 2;

    #[inline(always)]
    fn splat(self, value: f64) -> float64x2_t {
        // SAFETY: NEON is part of the base instruction set, here and below.
        unsafe { vdupq_n_f64(value) }
    }
    #[inline(always)]
    fn add(self, a: float64x2_t, b: float64x2_t) -> float64x2_t {
        // SAFETY: as in `splat`.
        unsafe { vaddq_f64(a, b) }
    }
    #[inline(always)]
    fn mul(self, a: float64x2_t, b: float64x2_t) -> float64x2_t {
        // SAFETY: as in `splat`.
        unsafe { vmulq_f64(a, b) }
    }
    #[inline(always)]
    fn mul_add(self, a: float64x2_t, b: float64x2_t, c: float64x2_t) -> float64x2_t {
        // SAFETY: as in `splat`.
        unsafe { vfmaq_f64(c, a, b) }
    }
    #[inline(always)]
    fn mul_sub(self, a: float64x2_t, b: float64x2_t, c: float64x2_t) -> float64x2_t {
        // SAFETY: as in `splat`.
        unsafe { vfmsq_f64(c, a, b) }
    }
    #[inline(always)]
    fn sum(self, a: float64x2_t) -> f64 {
        // SAFETY: as in `splat`.
        unsafe { vaddvq_f64(a) }
    }
    #[inline(always)]
    unsafe fn load64(self, source: *const f64) -> float64x2_t {
        // SAFETY: the caller vouches for two entries.
        unsafe { vld1q_f64(source) }
    }
    #[inline(always)]
    unsafe fn load64_part(self, source: *const f64, count: usize) -> float64x2_t {
        // SAFETY: the caller vouches for `count` entries; the first is read where there is one.
        unsafe {
            let zero = vdupq_n_f64(0.0);
            if count == 0 { zero } else { vsetq_lane_f64::<0>(*source, zero) }
        }
    }
    #[inline(always)]
    unsafe fn store64(self, target: *mut f64, a: float64x2_t) {
        // SAFETY: the caller vouches for two entries.
        unsafe { vst1q_f64(target, a) }
    }
    #[inline(always)]
    unsafe fn store64_part(self, target: *mut f64, a: float64x2_t, count: usize) {
        let mut lanes = [0.0; 2];
        // SAFETY: `lanes` holds two entries; the caller vouches for `count` entries of `target`.
        unsafe {
            vst1q_f64(lanes.as_mut_ptr(), a);
            if count > 0 {
                *target = lanes[0];
            }
        }
    }
    #[inline(always)]
    unsafe fn load32(self, source: *const f32) -> float64x2_t {
        // SAFETY: the caller vouches for two entries.
        unsafe { vcvt_f64_f32(vld1_f32(source)) }
    }
    #[inline(always)]
    unsafe fn store32(self, target: *mut f32, a: float64x2_t) {
        // SAFETY: the caller vouches for two entries.
        unsafe { vst1_f32(target, vcvt_f32_f64(a)) }
    }
}
