//! What truncation can have cost.

use super::Tracker;
use crate::error::Error;
use crate::scalar::Scalar;

/// Bounds on how far the tracked answer is from the exact weighted one.
///
/// What was given up tick by tick is a positive semidefinite scatter of known trace `lost`, and the exact scatter is the
/// tracked one and it. So each exact energy lies between the tracked one and the tracked one plus `lost` (Weyl), and
/// the sine of the largest angle between the reported and the exact subspace is at most `lost / (gap - lost)` where
/// that is positive, `gap` being the energy between the last reported and the next direction (Davis and Kahan, SIAM J.
/// Numer. Anal. 7 (1970) 1-46).
///
/// All of it rests on the tracked scatter never exceeding the exact one, and that has a price. An axis leans toward a new
/// direction by their common energy over the difference of theirs; what was given up of the new direction's is not there
/// to be subtracted, so axes lean too little, by its share of their energy. Assuming that what was given up is spread evenly
/// would mend most of that, where it is so, and void the bounds (`benches/drift.py` shows both).
#[derive(Clone, Debug, PartialEq)]
pub struct Certificate {
    /// Energy that is the most by which any tracked energy is too low.
    pub lost: f64,
    /// Largest sine of an angle between the reported and the exact subspace; None where the bound says nothing.
    pub sine: Option<f64>,
}

impl<T: Scalar> Tracker<T> {
    /// What truncation can have cost so far.
    ///
    /// # Errors
    /// As [`Tracker::refresh`].
    pub fn certificate(&mut self) -> Result<Certificate, Error> {
        self.refresh()?;
        let lost = self.lost_energy();
        let weakest = self.energies().last().copied().unwrap_or(0.0);
        let gap = weakest - self.guard_energies().first().copied().unwrap_or(0.0);
        let sine = (gap > lost).then(|| lost / (gap - lost)).filter(|&sine| sine <= 1.0);
        Ok(Certificate { lost, sine })
    }
}
