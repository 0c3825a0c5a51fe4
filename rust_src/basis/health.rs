//! How orthonormal the basis is, computed now.

use super::Basis;
use crate::dense::Svd;
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

impl<T: Scalar> Basis<T> {
    /// Spectral norm of `I - Q Q^T`; `rank^2 dim` flops.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen.
    pub fn orthogonality_error(&self) -> Result<f64, Error> {
        let rank = self.rank;
        let mut defect = vec![0.0; rank * rank];
        let mut row = vec![0.0; self.dim()];
        for index in 0..rank {
            row.iter_mut().zip(self.q.row(index)).for_each(|(target, value)| *target = value.to_f64());
            let products = &mut defect[index * rank..][..=index];
            ops::project(self.q.view(index + 1), &row, products);
            products[index] -= 1.0;
            for below in 0..index {
                defect[below * rank + index] = defect[index * rank + below];
            }
        }
        let mut svd = Svd::new(rank, rank);
        svd.decompose(&defect)?;
        Ok(svd.values().first().copied().unwrap_or(0.0))
    }
}
