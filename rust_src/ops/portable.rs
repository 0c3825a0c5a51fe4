//! Lanes without instructions of their own: four `f64` that any processor can add and multiply.

use super::lanes::Lanes;

/// Always there.
#[derive(Clone, Copy, Debug)]
pub struct Portable;

/// Width of the array that stands in for a register.
const WIDTH: usize = 4;

#[inline(always)]
fn each(f: impl Fn(usize) -> f64) -> [f64; WIDTH] {
    [f(0), f(1), f(2), f(3)]
}

// SAFETY: `load64` and `store64` move an array of `WIDTH` entries, the `_part` bodies stop at `count`.
unsafe impl Lanes for Portable {
    type Register = [f64; WIDTH];
    const WIDTH: usize = WIDTH;

    #[inline(always)]
    fn splat(self, value: f64) -> Self::Register {
        [value; WIDTH]
    }
    #[inline(always)]
    fn add(self, a: Self::Register, b: Self::Register) -> Self::Register {
        each(|lane| a[lane] + b[lane])
    }
    #[inline(always)]
    fn mul(self, a: Self::Register, b: Self::Register) -> Self::Register {
        each(|lane| a[lane] * b[lane])
    }
    #[inline(always)]
    fn mul_add(self, a: Self::Register, b: Self::Register, c: Self::Register) -> Self::Register {
        each(|lane| c[lane] + a[lane] * b[lane])
    }
    #[inline(always)]
    fn mul_sub(self, a: Self::Register, b: Self::Register, c: Self::Register) -> Self::Register {
        each(|lane| c[lane] - a[lane] * b[lane])
    }
    #[inline(always)]
    fn sum(self, a: Self::Register) -> f64 {
        (a[0] + a[1]) + (a[2] + a[3])
    }
    #[inline(always)]
    unsafe fn load64(self, source: *const f64) -> Self::Register {
        // SAFETY: the caller vouches for `WIDTH` entries; the read asks no alignment.
        unsafe { source.cast::<[f64; WIDTH]>().read_unaligned() }
    }
    #[inline(always)]
    unsafe fn load64_part(self, source: *const f64, count: usize) -> Self::Register {
        each(|lane| {
            if lane < count {
                // SAFETY: `lane < count`, and the caller vouches for `count` entries.
                unsafe { *source.add(lane) }
            } else {
                0.0
            }
        })
    }
    #[inline(always)]
    unsafe fn store64(self, target: *mut f64, a: Self::Register) {
        // SAFETY: the caller vouches for `WIDTH` entries; the write asks no alignment.
        unsafe { target.cast::<[f64; WIDTH]>().write_unaligned(a) }
    }
    #[inline(always)]
    unsafe fn store64_part(self, target: *mut f64, a: Self::Register, count: usize) {
        for (lane, &value) in a.iter().enumerate().take(count) {
            // SAFETY: `lane < count`, and the caller vouches for `count` entries.
            unsafe { *target.add(lane) = value };
        }
    }
    #[inline(always)]
    unsafe fn load32(self, source: *const f32) -> Self::Register {
        // SAFETY: the caller vouches for `WIDTH` entries; the read asks no alignment.
        let narrow = unsafe { source.cast::<[f32; WIDTH]>().read_unaligned() };
        each(|lane| f64::from(narrow[lane]))
    }
    #[inline(always)]
    #[expect(clippy::cast_possible_truncation, reason = "rounding to the stored type is the purpose")]
    unsafe fn store32(self, target: *mut f32, a: Self::Register) {
        let narrow = [a[0] as f32, a[1] as f32, a[2] as f32, a[3] as f32];
        // SAFETY: the caller vouches for `WIDTH` entries; the write asks no alignment.
        unsafe { target.cast::<[f32; WIDTH]>().write_unaligned(narrow) }
    }
}
