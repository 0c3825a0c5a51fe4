//! Small dense decompositions, by a library, sequential, in a workspace made once.

use faer::diag::DiagMut;
use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::evd::{ComputeEigenvectors, self_adjoint_evd, self_adjoint_evd_scratch};
use faer::linalg::svd::{ComputeSvdVectors, svd, svd_scratch};
use faer::{MatMut, MatRef, Par, Spec};

use crate::error::Error;

/// Singular values and right singular vectors of a matrix of fixed shape, again and again without allocation.
pub struct Svd {
    rows: usize,
    cols: usize,
    values: Vec<f64>,
    right: Vec<f64>,
    workspace: MemBuffer,
}

impl Svd {
    /// Workspace for matrices of `rows` by `cols`.
    #[must_use]
    pub fn new(rows: usize, cols: usize) -> Self {
        let size = rows.min(cols);
        let request = svd_scratch::<f64>(
            rows,
            cols,
            ComputeSvdVectors::No,
            ComputeSvdVectors::Thin,
            Par::Seq,
            Spec::default(),
        );
        Self {
            rows,
            cols,
            values: vec![0.0; size],
            right: vec![0.0; size * cols],
            workspace: MemBuffer::new(request),
        }
    }

    /// Decomposes `matrix`, row-major, `rows` by `cols`; about `10 rows cols^2` flops.
    ///
    /// # Errors
    /// [`Error::NoConvergence`] where the library gives up; never seen on finite entries.
    pub fn decompose(&mut self, matrix: &[f64]) -> Result<(), Error> {
        let size = self.values.len();
        if size == 0 {
            return Ok(());
        }
        svd(
            MatRef::from_row_major_slice(matrix, self.rows, self.cols),
            DiagMut::from_slice_mut(&mut self.values),
            None,
            Some(MatMut::from_column_major_slice_mut(&mut self.right, self.cols, size)),
            Par::Seq,
            MemStack::new(&mut self.workspace),
            Spec::default(),
        )
        .map_err(|_| Error::NoConvergence { what: "singular value decomposition" })
    }

    /// Singular values of the last matrix, descending.
    #[must_use]
    pub fn values(&self) -> &[f64] {
        &self.values
    }

    /// Right singular vector `index` of the last matrix, `cols` entries.
    #[must_use]
    pub fn right(&self, index: usize) -> &[f64] {
        &self.right[index * self.cols..][..self.cols]
    }
}

/// Eigenvalues and eigenvectors of a symmetric matrix of fixed order, again and again without allocation.
pub struct Eigen {
    size: usize,
    values: Vec<f64>,
    vectors: Vec<f64>,
    workspace: MemBuffer,
}

impl Eigen {
    /// Workspace for matrices of order `size`.
    #[must_use]
    pub fn new(size: usize) -> Self {
        let request =
            self_adjoint_evd_scratch::<f64>(size, ComputeEigenvectors::Yes, Par::Seq, Spec::default());
        Self {
            size,
            values: vec![0.0; size],
            vectors: vec![0.0; size * size],
            workspace: MemBuffer::new(request),
        }
    }

    /// Decomposes `matrix`, row-major, of which the lower triangle is read; about `6 size^3` flops.
    ///
    /// # Errors
    /// [`Error::NoConvergence`] where the library gives up; never seen on finite entries.
    pub fn decompose(&mut self, matrix: &[f64]) -> Result<(), Error> {
        if self.size == 0 {
            return Ok(());
        }
        self_adjoint_evd(
            MatRef::from_row_major_slice(matrix, self.size, self.size),
            DiagMut::from_slice_mut(&mut self.values),
            Some(MatMut::from_column_major_slice_mut(&mut self.vectors, self.size, self.size)),
            Par::Seq,
            MemStack::new(&mut self.workspace),
            Spec::default(),
        )
        .map_err(|_| Error::NoConvergence { what: "eigenvalue decomposition" })
    }

    /// Eigenvalues of the last matrix, ascending.
    #[must_use]
    pub fn values(&self) -> &[f64] {
        &self.values
    }

    /// The unit eigenvectors of the `count` largest eigenvalues, ascending, one after another.
    #[must_use]
    pub fn strongest(&self, count: usize) -> &[f64] {
        &self.vectors[(self.size - count) * self.size..]
    }
}
