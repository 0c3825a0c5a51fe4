//! Adding a vector.

use super::Basis;
use super::orthogonalize::{Vanished, times_power};
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// Why a vector was not accepted.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Reason {
    /// All its entries are zero.
    Zero,
    /// Its residual is within the tolerance.
    Dependent,
    /// It is independent, but the basis holds as many vectors as it may.
    Full,
}

impl Reason {
    /// One word for it.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Zero => "zero",
            Self::Dependent => "dependent",
            Self::Full => "full",
        }
    }
}

/// What became of a vector.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Step {
    /// Why it was not accepted; None: it was.
    pub reason: Option<Reason>,
    /// Rank before.
    pub rank: usize,
    /// Norm of the vector.
    pub norm: f64,
    /// Norm of what the basis did not explain.
    pub residual_norm: f64,
    /// The residual norm up to which it would have counted as dependent.
    pub threshold: f64,
    /// Subtractions made.
    pub passes: u32,
    /// Measured loss of orthogonality of the residual.
    pub loss: f64,
}

impl Step {
    /// Whether the basis grew.
    #[must_use]
    pub fn accepted(&self) -> bool {
        self.reason.is_none()
    }
}

impl<T: Scalar> Basis<T> {
    /// Adds `v`. A vector that is zero, dependent or one too many leaves the basis as it is: see
    /// [`Step::reason`]. Its coefficients are in [`Basis::coefficients`]. Two sweeps and `6 rank dim` flops
    /// where one subtraction is enough.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`], or [`Error::Overflow`] where the norm of `v` is no number.
    pub fn add(&mut self, v: &[f64]) -> Result<Step, Error> {
        let vanished = Vanished { relative: self.tolerance.relative, absolute: self.tolerance.absolute };
        let split = self.orthogonalize(v, vanished)?;
        let threshold = (self.tolerance.relative * split.norm).max(self.tolerance.absolute);
        let reason = self.reason(split.norm, split.residual_norm, threshold, split.loss);
        let step = Step {
            reason,
            rank: self.rank,
            norm: split.norm,
            residual_norm: split.residual_norm,
            threshold,
            passes: split.passes,
            loss: split.loss,
        };
        if step.accepted() {
            let w = std::mem::take(&mut self.w);
            self.push(split.kept_norm, &w, split.exponent);
            self.w = w;
        }
        Ok(step)
    }

    /// Why a vector of that norm, with that residual, is not accepted.
    pub(super) fn reason(&self, norm: f64, residual_norm: f64, threshold: f64, loss: f64) -> Option<Reason> {
        if norm == 0.0 {
            Some(Reason::Zero)
        } else if residual_norm == 0.0
            || residual_norm <= threshold
            || !(loss <= UNCLEAN && residual_norm.is_finite())
        {
            // The last also keeps out what is no number: vectors that another thread wrote to after they were checked.
            Some(Reason::Dependent)
        } else if self.rank == self.capacity() {
            Some(Reason::Full)
        } else {
            None
        }
    }

    /// Appends the residual `w`, of norm `norm`, as a basis row, and the coefficients in `h` as a column of the
    /// triangular factor; `w` is that of the vector times `2^-exponent`.
    pub(super) fn push(&mut self, norm: f64, w: &[f64], exponent: i32) {
        self.make_room();
        ops::normalize_into(norm, w, self.q.row_mut(self.rank));
        self.r.push(&self.h, times_power(norm, exponent));
        self.rank += 1;
    }
}

/// A loss no vector with digits left shows after the last pass: its residual is noise.
const UNCLEAN: f64 = 1e-3;
