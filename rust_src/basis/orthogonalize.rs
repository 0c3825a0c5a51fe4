//! One vector against the basis: coefficients, residual, and the loss actually measured.

use super::Basis;
use crate::error::Error;
use crate::ops;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Measured loss `|Q w| / |w|`, in units of eps, above which a residual is swept again. With every vector below
/// it the Frobenius norm of `I - Q Q^T`, diagonal apart, is at most `sqrt(2 rank)` eps, whatever the rank: a
/// seventh of the bound that is promised. The rounding of the measurement itself stays below it up to rank 1000.
pub const LOSS_LIMIT: f64 = 1.0;

/// Further subtractions after which a residual that still will not come clean is taken as rounding noise. One cleans
/// any vector that has digits left (Giraud et al. 2005); the rest is margin for a tolerance of zero.
const MOST_PASSES: u32 = 5;

/// Share of the loss before that a subtraction must get below; one that does not, met rounding.
const STUCK: f64 = 0.5;

/// Squared norms in which neither the squares of the entries that count nor those of a residual 2^-60 as long
/// leave the normal range: 2^-800 to 2^1000.
pub(super) const SAFE_SQUARES: std::ops::RangeInclusive<f64> =
    1.499_696_813_895_631e-241..=1.071_508_607_186_267_3e301;

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

        squares = ops::subtract_measured(q, &self.h, source, &mut self.w, &mut self.s);
        let measured = Measured { squares, s: &mut self.s, correction: &mut self.correction };
        let cleaned = clean(q, &mut self.w, measured, &mut self.h, floor);
        if exponent != 0 {
            self.h.iter_mut().for_each(|h| *h = times_power(*h, exponent));
        }
        Ok(Split {
            norm: times_power(norm, exponent),
            residual_norm: times_power(cleaned.norm, exponent),
            passes: 1 + cleaned.passes,
            loss: cleaned.loss(),
            exponent,
            kept_norm: cleaned.norm,
        })
    }
}

/// What the sweep before a cleaning measured.
pub(crate) struct Measured<'a> {
    /// Square of the residual.
    pub squares: f64,
    /// What is left of the basis in it.
    pub s: &'a mut Vec<f64>,
    /// Room as long as `s`.
    pub correction: &'a mut Vec<f64>,
}

/// A residual after cleaning.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Cleaned {
    /// Its norm.
    pub norm: f64,
    /// Norm of what is left of the basis in it, as measured.
    pub leftover: f64,
    /// Subtractions made here.
    pub passes: u32,
}

impl Cleaned {
    /// Measured loss of orthogonality; 0 where nothing is left of the vector.
    pub fn loss(&self) -> f64 {
        if self.norm > 0.0 { self.leftover / self.norm } else { 0.0 }
    }
}

/// Subtracts from `w`, whose square is `squares`, what is measured to be left of `q` in it, `s`, until the
/// measured loss is within the limit, the norm within `floor`, or a subtraction changes nothing any more: then
/// only rounding is left, of the measurement or of the vector. What is subtracted is added to `h`.
pub(crate) fn clean<T: Scalar>(
    q: Rows<'_, T>,
    w: &mut [f64],
    measured: Measured<'_>,
    h: &mut [f64],
    floor: f64,
) -> Cleaned {
    let Measured { mut squares, s, correction } = measured;
    let limit = LOSS_LIMIT * T::EPSILON;
    let mut before = f64::INFINITY;
    let mut passes = 0;
    loop {
        let norm = squares.sqrt();
        let leftover = norm_of(s);
        let cleaned = Cleaned { norm, leftover, passes };
        let stuck = cleaned.loss() > STUCK * before;
        if leftover <= limit * norm || norm <= floor || stuck || passes == MOST_PASSES {
            return cleaned;
        }
        before = cleaned.loss();
        h.iter_mut().zip(s.iter()).for_each(|(h, s)| *h += s);
        std::mem::swap(s, correction);
        squares = ops::subtract_measured_in_place(q, correction, w, s);
        passes += 1;
    }
}

/// Euclidean norm of a few coefficients.
pub(super) fn norm_of(x: &[f64]) -> f64 {
    // Not `sum`: that of nothing is -0.
    x.iter().fold(0.0, |sum, x| sum + x * x).sqrt()
}

/// Refuses what [`Basis::add`] refuses of the entries of a vector.
pub(super) fn check(v: &[f64]) -> Result<(), Error> {
    if SAFE_SQUARES.contains(&ops::norm_squared(v)) {
        return Ok(());
    }
    let Some(exponent) = exponent_of_largest(v)? else { return Ok(()) };
    let scaled: f64 = v.iter().map(|&entry| times_power(entry, -exponent).powi(2)).sum();
    if times_power(scaled.sqrt(), exponent).is_finite() {
        Ok(())
    } else {
        Err(Error::Overflow { what: "vector" })
    }
}

/// Binary exponent of the largest entry; None where all are zero.
pub(super) fn exponent_of_largest(v: &[f64]) -> Result<Option<i32>, Error> {
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
