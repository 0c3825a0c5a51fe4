//! What a sweep asks of an instruction set: a handful of operations on a register of `f64`.
//!
//! A value of a [`Lanes`] type is the proof that the processor has those instructions: outside this module it
//! comes from detection only. The sweeps are written once against this trait; each instruction set is one file
//! of one-line bodies, small enough to check by eye.

/// A register of `f64` and the operations on it.
///
/// # Safety
/// Every method that takes a pointer reads or writes the [`Lanes::WIDTH`] entries behind it (`count` of them
/// for the `_part` methods, `count < WIDTH`), without any demand on alignment. An implementation must touch
/// no others.
pub unsafe trait Lanes: Copy {
    /// The register.
    type Register: Copy;
    /// How many `f64` it holds.
    const WIDTH: usize;

    /// All lanes `value`.
    fn splat(self, value: f64) -> Self::Register;
    /// `a + b`.
    fn add(self, a: Self::Register, b: Self::Register) -> Self::Register;
    /// `a b`.
    fn mul(self, a: Self::Register, b: Self::Register) -> Self::Register;
    /// `c + a b`, rounded once where the instruction exists.
    fn mul_add(self, a: Self::Register, b: Self::Register, c: Self::Register) -> Self::Register;
    /// `c - a b`, likewise.
    fn mul_sub(self, a: Self::Register, b: Self::Register, c: Self::Register) -> Self::Register;
    /// Sum over the lanes.
    fn sum(self, a: Self::Register) -> f64;

    /// Loads a register of `f64`.
    ///
    /// # Safety
    /// `source` points to `WIDTH` readable entries.
    unsafe fn load64(self, source: *const f64) -> Self::Register;
    /// Loads the first `count` lanes; the rest are zero.
    ///
    /// # Safety
    /// `source` points to `count` readable entries.
    unsafe fn load64_part(self, source: *const f64, count: usize) -> Self::Register;
    /// Stores a register.
    ///
    /// # Safety
    /// `target` points to `WIDTH` writable entries.
    unsafe fn store64(self, target: *mut f64, a: Self::Register);
    /// Stores the first `count` lanes.
    ///
    /// # Safety
    /// `target` points to `count` writable entries.
    unsafe fn store64_part(self, target: *mut f64, a: Self::Register, count: usize);
    /// Loads a register from `f32`, exactly.
    ///
    /// # Safety
    /// `source` points to `WIDTH` readable entries.
    unsafe fn load32(self, source: *const f32) -> Self::Register;
    /// Stores a register as `f32`, rounded to nearest.
    ///
    /// # Safety
    /// `target` points to `WIDTH` writable entries.
    unsafe fn store32(self, target: *mut f32, a: Self::Register);

    /// Loads the first `count` lanes from `f32`; the rest are zero.
    ///
    /// # Safety
    /// `source` points to `count` readable entries.
    #[inline(always)]
    unsafe fn load32_part(self, source: *const f32, count: usize) -> Self::Register {
        let mut lanes = [0.0_f64; MAX_WIDTH];
        for (index, lane) in lanes.iter_mut().enumerate().take(count) {
            // SAFETY: `index < count`, and the caller vouches for `count` readable entries.
            *lane = f64::from(unsafe { *source.add(index) });
        }
        // SAFETY: `lanes` holds `MAX_WIDTH >= WIDTH` entries.
        unsafe { self.load64(lanes.as_ptr()) }
    }

    /// Stores the first `count` lanes as `f32`.
    ///
    /// # Safety
    /// `target` points to `count` writable entries.
    #[inline(always)]
    unsafe fn store32_part(self, target: *mut f32, a: Self::Register, count: usize) {
        let mut lanes = [0.0_f64; MAX_WIDTH];
        // SAFETY: `lanes` holds `MAX_WIDTH >= WIDTH` entries.
        unsafe { self.store64(lanes.as_mut_ptr(), a) };
        for (index, &lane) in lanes.iter().enumerate().take(count) {
            // SAFETY: `index < count`, and the caller vouches for `count` writable entries.
            unsafe { *target.add(index) = narrow(lane) };
        }
    }
}

/// Lanes of the widest register.
pub(super) const MAX_WIDTH: usize = 8;

/// A stored type that every instruction set can load and store. It seals [`crate::Scalar`]: this module is
/// private, so no type outside the crate can have it.
pub trait Transfer: Copy {
    /// Loads a register.
    ///
    /// # Safety
    /// `source` points to `L::WIDTH` readable entries.
    unsafe fn load<L: Lanes>(lanes: L, source: *const Self) -> L::Register;
    /// Loads `count` lanes, the rest zero.
    ///
    /// # Safety
    /// `source` points to `count` readable entries.
    unsafe fn load_part<L: Lanes>(lanes: L, source: *const Self, count: usize) -> L::Register;
    /// Stores a register.
    ///
    /// # Safety
    /// `target` points to `L::WIDTH` writable entries.
    unsafe fn store<L: Lanes>(lanes: L, target: *mut Self, a: L::Register);
    /// Stores `count` lanes.
    ///
    /// # Safety
    /// `target` points to `count` writable entries.
    unsafe fn store_part<L: Lanes>(lanes: L, target: *mut Self, a: L::Register, count: usize);
}

/// Rounds to `f32`.
#[expect(clippy::cast_possible_truncation, reason = "rounding to the stored type is the purpose")]
fn narrow(value: f64) -> f32 {
    value as f32
}

macro_rules! transfer {
    ($stored:ty: $load:ident, $load_part:ident, $store:ident, $store_part:ident) => {
        impl Transfer for $stored {
            #[inline(always)]
            unsafe fn load<L: Lanes>(lanes: L, source: *const Self) -> L::Register {
                // SAFETY: the caller's promise is the one asked for.
                unsafe { lanes.$load(source) }
            }
            #[inline(always)]
            unsafe fn load_part<L: Lanes>(lanes: L, source: *const Self, count: usize) -> L::Register {
                // SAFETY: as above.
                unsafe { lanes.$load_part(source, count) }
            }
            #[inline(always)]
            unsafe fn store<L: Lanes>(lanes: L, target: *mut Self, a: L::Register) {
                // SAFETY: as above.
                unsafe { lanes.$store(target, a) }
            }
            #[inline(always)]
            unsafe fn store_part<L: Lanes>(lanes: L, target: *mut Self, a: L::Register, count: usize) {
                // SAFETY: as above.
                unsafe { lanes.$store_part(target, a, count) }
            }
        }
    };
}

transfer!(f64: load64, load64_part, store64, store64_part);
transfer!(f32: load32, load32_part, store32, store32_part);
