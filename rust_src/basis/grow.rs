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
        // Where nothing is left, or only what sweeping could not clean, there is no direction to take.
        let unclean = split.loss > UNCLEAN;
        let reason = if split.norm == 0.0 {
            Some(Reason::Zero)
        } else if split.residual_norm <= threshold || split.residual_norm == 0.0 || unclean {
            Some(Reason::Dependent)
        } else if self.rank == self.capacity() {
            Some(Reason::Full)
        } else {
            None
        };
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
            self.make_room();
            let (_, next) = self.q.view_and_next(self.rank);
            ops::normalize_into(split.kept_norm, &self.w, next);
            self.r.push(&self.h, times_power(split.kept_norm, split.exponent));
            self.rank += 1;
        }
        Ok(step)
    }
}

/// A loss no vector with digits left shows after the last pass: its residual is noise.
const UNCLEAN: f64 = 1e-3;
