//! Sweeps that touch each entry once and add nothing up: scaling, normalizing, rotating.

use super::lanes::{Lanes, Transfer};
use crate::scalar::Scalar;

/// Rows shorter than this are divided by their norm, longer ones multiplied by its reciprocal: cheaper, and
/// its one rounding more matters only where few entries share the error.
const SHORT: usize = 32;

/// See [`super::Path::normalize_into`].
#[inline(always)]
pub(super) fn normalize_into<L: Lanes, T: Scalar>(lanes: L, norm: f64, source: &[f64], target: &mut [T]) {
    assert_eq!(source.len(), target.len(), "vectors of equal length");
    if source.len() < SHORT {
        for (out, value) in target.iter_mut().zip(source) {
            *out = T::from_f64(value / norm);
        }
    } else {
        // SAFETY: both hold `source.len()` entries.
        unsafe { scaled(lanes, norm.recip(), source.as_ptr(), target.as_mut_ptr(), source.len()) };
    }
}

/// See [`super::Path::scale_into`].
#[inline(always)]
pub(super) fn scale_into<L: Lanes, T: Scalar>(lanes: L, factor: f64, source: &[f64], target: &mut [T]) {
    assert_eq!(source.len(), target.len(), "vectors of equal length");
    // SAFETY: both hold `source.len()` entries.
    unsafe { scaled(lanes, factor, source.as_ptr(), target.as_mut_ptr(), source.len()) };
}

/// `out = factor x` over `n` entries.
///
/// # Safety
/// `x` points to `n` readable entries, `out` to `n` writable ones.
#[inline(always)]
pub(super) unsafe fn scaled<L: Lanes, T: Transfer>(
    lanes: L,
    factor: f64,
    x: *const f64,
    out: *mut T,
    n: usize,
) {
    let factor = lanes.splat(factor);
    let mut at = 0;
    // SAFETY: all accesses lie below `n`.
    unsafe {
        while at + L::WIDTH <= n {
            T::store(lanes, out.add(at), lanes.mul(factor, lanes.load64(x.add(at))));
            at += L::WIDTH;
        }
        if at < n {
            let value = lanes.mul(factor, lanes.load64_part(x.add(at), n - at));
            T::store_part(lanes, out.add(at), value, n - at);
        }
    }
}

/// See [`super::Path::rotate`].
#[inline(always)]
pub(super) fn rotate<L: Lanes, T: Scalar>(lanes: L, x: &mut [T], y: &mut [T], c: f64, s: f64) {
    assert_eq!(x.len(), y.len(), "vectors of equal length");
    let (cosine, sine) = (lanes.splat(c), lanes.splat(s));
    let (first, second, n) = (x.as_mut_ptr(), y.as_mut_ptr(), x.len());
    let mut at = 0;
    // SAFETY: all accesses lie below `n`, the length of both.
    unsafe {
        while at + L::WIDTH <= n {
            let a = T::load(lanes, first.add(at));
            let b = T::load(lanes, second.add(at));
            T::store(lanes, first.add(at), lanes.mul_add(sine, b, lanes.mul(cosine, a)));
            T::store(lanes, second.add(at), lanes.mul_sub(sine, a, lanes.mul(cosine, b)));
            at += L::WIDTH;
        }
        if at < n {
            let a = T::load_part(lanes, first.add(at), n - at);
            let b = T::load_part(lanes, second.add(at), n - at);
            T::store_part(lanes, first.add(at), lanes.mul_add(sine, b, lanes.mul(cosine, a)), n - at);
            T::store_part(lanes, second.add(at), lanes.mul_sub(sine, a, lanes.mul(cosine, b)), n - at);
        }
    }
}

/// `out += factor x` over `n` entries.
///
/// # Safety
/// `x` points to `n` readable entries, `out` to `n` readable and writable ones; they do not overlap.
#[inline(always)]
pub(super) unsafe fn add_scaled<L: Lanes, T: Transfer>(
    lanes: L,
    factor: f64,
    x: *const f64,
    out: *mut T,
    n: usize,
) {
    let factor = lanes.splat(factor);
    let mut at = 0;
    // SAFETY: all accesses lie below `n`.
    unsafe {
        while at + L::WIDTH <= n {
            let sum = lanes.mul_add(factor, lanes.load64(x.add(at)), T::load(lanes, out.add(at)));
            T::store(lanes, out.add(at), sum);
            at += L::WIDTH;
        }
        if at < n {
            let old = T::load_part(lanes, out.add(at), n - at);
            let sum = lanes.mul_add(factor, lanes.load64_part(x.add(at), n - at), old);
            T::store_part(lanes, out.add(at), sum, n - at);
        }
    }
}

/// See [`super::Path::rotate_chain`].
#[inline(always)]
pub(super) fn rotate_chain<L: Lanes, T: Scalar>(
    lanes: L,
    rows: &mut [T],
    stride: usize,
    dim: usize,
    first: usize,
    rotations: &[(f64, f64)],
) {
    if rotations.is_empty() {
        return;
    }
    assert!(
        stride >= dim && rows.len() >= (first + rotations.len()) * stride + dim,
        "rows of a chain of rotations"
    );
    let top = rows[first * stride..].as_mut_ptr();
    let mut at = 0;
    // The upper row of a pair is finished by its rotation; the lower one goes on into the next in registers.
    // SAFETY: row `first + i` starts at `i stride` from `top` and holds `dim` entries; `at + WIDTH <= dim`.
    unsafe {
        while at + L::WIDTH <= dim {
            let mut here = top.add(at);
            let mut carried = T::load(lanes, here);
            for &(c, s) in rotations {
                let (cosine, sine) = (lanes.splat(c), lanes.splat(s));
                let below = T::load(lanes, here.add(stride));
                T::store(lanes, here, lanes.mul_add(sine, below, lanes.mul(cosine, carried)));
                carried = lanes.mul_sub(sine, carried, lanes.mul(cosine, below));
                here = here.add(stride);
            }
            T::store(lanes, here, carried);
            at += L::WIDTH;
        }
        if at < dim {
            let rest = dim - at;
            let mut here = top.add(at);
            let mut carried = T::load_part(lanes, here, rest);
            for &(c, s) in rotations {
                let (cosine, sine) = (lanes.splat(c), lanes.splat(s));
                let below = T::load_part(lanes, here.add(stride), rest);
                T::store_part(lanes, here, lanes.mul_add(sine, below, lanes.mul(cosine, carried)), rest);
                carried = lanes.mul_sub(sine, carried, lanes.mul(cosine, below));
                here = here.add(stride);
            }
            T::store_part(lanes, here, carried, rest);
        }
    }
}
