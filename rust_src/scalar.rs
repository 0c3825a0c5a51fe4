//! The numeric types a basis can be stored in.
//!
//! Only long rows are stored as [`Scalar`]: coefficients, triangular factors, energies and norms are `f64`
//! always, and every sweep computes in `f64`. A `float32` basis thus halves the memory traffic, which is what
//! bounds a long sweep, and loses nothing to accumulation.

use crate::ops::Transfer;

/// A type the rows of a basis can be stored in: `f64` or `f32`.
pub trait Scalar: Transfer + Default + PartialEq + std::fmt::Debug + Send + Sync + 'static {
    /// Distance from 1 to the next larger number (2^-52 for `f64`, 2^-23 for `f32`).
    const EPSILON: f64;
    /// The name Python knows it by: `float64` or `float32`.
    const NAME: &'static str;
    /// The nearest stored value.
    fn from_f64(value: f64) -> Self;
    /// The value itself: exact.
    fn to_f64(self) -> f64;
}

impl Scalar for f64 {
    const EPSILON: f64 = f64::EPSILON;
    const NAME: &'static str = "float64";
    fn from_f64(value: f64) -> Self {
        value
    }
    fn to_f64(self) -> f64 {
        self
    }
}

impl Scalar for f32 {
    const EPSILON: f64 = f32::EPSILON as f64;
    const NAME: &'static str = "float32";
    #[expect(clippy::cast_possible_truncation, reason = "rounding to the stored type is the purpose")]
    fn from_f64(value: f64) -> Self {
        value as f32
    }
    fn to_f64(self) -> f64 {
        f64::from(self)
    }
}
