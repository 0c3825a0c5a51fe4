//! Least squares on the accepted vectors.

use super::Basis;
use super::orthogonalize::{exponent_of_largest, times_power};
use crate::dense::Svd;
use crate::error::Error;
use crate::scalar::Scalar;

/// Least-squares weights and what they leave.
#[derive(Clone, Debug, PartialEq)]
pub struct Solution {
    /// A weight an accepted vector.
    pub weights: Vec<f64>,
    /// Norm of the target less the weighted vectors.
    pub residual_norm: f64,
}

impl<T: Scalar> Basis<T> {
    /// Weights `x` of the accepted vectors that bring `sum_j x_j a_j` nearest to `target`: the coefficients of
    /// the target, re-orthogonalized as those of a vector to add, then back substitution. `6 rank dim + rank^2`
    /// flops. The weights lose digits as [`Basis::condition`] grows.
    ///
    /// # Errors
    /// As [`Basis::split`]; [`Error::Overflow`] where a weight is no number.
    pub fn solve(&mut self, target: &[f64]) -> Result<Solution, Error> {
        let split = self.split(target)?;
        let mut weights = self.h[..self.rank].to_vec();
        self.r.solve(&mut weights);
        if weights.iter().any(|weight| !weight.is_finite()) {
            return Err(Error::Overflow { what: "weights" });
        }
        Ok(Solution { weights, residual_norm: split.residual_norm })
    }

    /// Ratio of the largest to the smallest singular value of the accepted vectors; 1 for none. `10 rank^3`
    /// flops.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen.
    pub fn condition(&self) -> Result<f64, Error> {
        let mut svd = Svd::new(self.rank, self.rank);
        svd.decompose(&in_range(self.r.to_dense()))?;
        Ok(match (svd.values().first(), svd.values().last()) {
            (Some(largest), Some(smallest)) => largest / smallest,
            _ => 1.0,
        })
    }
}

/// The matrix times the power of two that brings its largest entry near 1: its condition is the same, and its squares
/// neither overflow nor vanish.
fn in_range(mut matrix: Vec<f64>) -> Vec<f64> {
    if let Ok(Some(exponent)) = exponent_of_largest(&matrix) {
        for entry in &mut matrix {
            *entry = times_power(*entry, -exponent);
        }
    }
    matrix
}
