//! One vector against the basis: coefficients, residual, and the loss actually measured.

use super::Basis;
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// Measured loss `|Q w| / |w|`, in units of eps, above which a residual is swept again. Half the rounding of
/// one entry: with every vector below it, `|I - Q Q^T|` stays under `eps sqrt(rank)`, a tenth of the bound
/// that is promised, and random vectors pass after one subtraction.
pub const LOSS_LIMIT: f64 = 0.5;

/// Subtractions after which a residual that still will not come clean is taken as rounding noise. Two clean
/// any vector that has digits left (Giraud et al. 2005); the rest is margin for a tolerance of zero.
const MOST_PASSES: u32 = 6;

/// Squared norms in which neither the squares of the entries that count nor those of a residual 2^-60 as long
/// leave the normal range: 2^-800 to 2^1000.
const SAFE_SQUARES: std::ops::RangeInclusive<f64> = 1.499_696_813_895_631e-241..=1.071_508_607_186_267_3e301;

/// A vector split against the basis.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Split {
    /// Norm of the vector.
    pub norm: f64,
    /// Norm of what the basis does not explain.
    pub residual_norm: f64,
    /// Subtractions made; the first is fused with its measurement.
    pub passes: u32,
    /// Measured loss of orthogonality `|Q w| / |w|` of the residual; 0 where nothing is left of it.
    pub loss: f64,
    /// The residual kept in the workspace is that of the vector times `2^-exponent`.
    pub(super) exponent: i32,
    /// Norm of the residual kept in the workspace.
    pub(super) kept_norm: f64,
}

/// When to stop sweeping because the residual has vanished.
#[derive(Clone, Copy, Debug)]
pub(super) struct Vanished {
    pub relative: f64,
    pub absolute: f64,
}

impl<T: Scalar> Basis<T> {
    /// Splits `v` into coefficients on the basis ([`Basis::coefficients`]) and a residual orthogonal to it
    /// ([`Basis::residual`]), without learning. Two sweeps, `6 rank dim` flops, where one subtraction is
    /// enough.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`], or [`Error::Overflow`] where the norm of `v` is no number.
    pub fn split(&mut self, v: &[f64]) -> Result<Split, Error> {
        let split = self.orthogonalize(v, Vanished { relative: 0.0, absolute: 0.0 })?;
        if split.exponent != 0 {
            self.w.iter_mut().for_each(|entry| *entry = times_power(*entry, split.exponent));
        }
        Ok(split)
    }

    /// Leaves the coefficients, in the unit of `v`, in `h`, and the residual times `2^-exponent` in `w`.
    pub(super) fn orthogonalize(&mut self, v: &[f64], vanished: Vanished) -> Result<Split, Error> {
        if v.len() != self.dim() {
            return Err(Error::Length { what: "vector", expected: self.dim(), got: v.len() });
        }
        let q = self.q.view(self.rank);
        for buffer in [&mut self.h, &mut self.s, &mut self.correction] {
            buffer.resize(self.rank, 0.0);
        }
        let mut source = v;
        let mut exponent = 0;
        let mut squares = ops::project(q, v, &mut self.h);
        if !SAFE_SQUARES.contains(&squares) {
            let Some(needed) = exponent_of_largest(v)? else {
                self.w.fill(0.0);
                return Ok(Split {
                    norm: 0.0,
                    residual_norm: 0.0,
                    passes: 0,
                    loss: 0.0,
                    exponent: 0,
                    kept_norm: 0.0,
                });
            };
            exponent = needed;
            for (target, &entry) in self.scaled.iter_mut().zip(v) {
                *target = times_power(entry, -exponent);
            }
            source = &self.scaled;
            squares = ops::project(q, source, &mut self.h);
        }
        let norm = squares.sqrt();
        if !times_power(norm, exponent).is_finite() {
            return Err(Error::Overflow { what: "vector" });
        }
        let floor = (vanished.relative * norm).max(times_power(vanished.absolute, -exponent));
        let limit = LOSS_LIMIT * T::EPSILON;

        squares = ops::subtract_measured(q, &self.h, source, &mut self.w, &mut self.s);
        let mut passes = 1;
        let (kept_norm, loss) = loop {
            let kept = squares.sqrt();
            let leftover = self.s.iter().map(|s| s * s).sum::<f64>().sqrt();
            let clean = leftover <= limit * kept;
            if clean || kept <= floor || passes == MOST_PASSES {
                break (kept, if kept > 0.0 { leftover / kept } else { 0.0 });
            }
            self.h.iter_mut().zip(&self.s).for_each(|(h, s)| *h += s);
            std::mem::swap(&mut self.s, &mut self.correction);
            squares = ops::subtract_measured_in_place(q, &self.correction, &mut self.w, &mut self.s);
            passes += 1;
        };
        if exponent != 0 {
            self.h.iter_mut().for_each(|h| *h = times_power(*h, exponent));
        }
        Ok(Split {
            norm: times_power(norm, exponent),
            residual_norm: times_power(kept_norm, exponent),
            passes,
            loss,
            exponent,
            kept_norm,
        })
    }
}

/// Binary exponent of the largest entry; None where all are zero.
fn exponent_of_largest(v: &[f64]) -> Result<Option<i32>, Error> {
    let mut largest = 0.0_f64;
    for (index, &value) in v.iter().enumerate() {
        if !value.is_finite() {
            return Err(Error::NonFinite { what: "vector", index, value });
        }
        largest = largest.max(value.abs());
    }
    Ok((largest > 0.0).then(|| {
        // The exponent field, one step at a time for subnormals: 2^54 brings them into the normal range.
        if largest >= f64::MIN_POSITIVE {
            exponent_field(largest)
        } else {
            exponent_field(largest * 2f64.powi(54)) - 54
        }
    }))
}

/// Unbiased exponent of a normal number.
fn exponent_field(value: f64) -> i32 {
    i32::try_from((value.to_bits() >> 52) & 0x7ff).unwrap_or(0) - 1023
}

/// `value 2^exponent` for exponents up to twice the range of a number, in steps that do not overflow early.
pub(super) fn times_power(value: f64, exponent: i32) -> f64 {
    if exponent == 0 {
        return value;
    }
    let half = exponent / 2;
    value * 2f64.powi(half) * 2f64.powi(exponent - half)
}
