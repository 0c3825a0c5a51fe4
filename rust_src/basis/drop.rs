//! Forgetting an accepted vector.

use super::Basis;
use super::orthogonalize::LOSS_LIMIT;
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

impl<T: Scalar> Basis<T> {
    /// Forgets accepted vector `index`; basis and triangular factor hold for the rest, in their order. The
    /// factor loses a column and plane rotations restore its triangle (Daniel, Gragg, Kaufman, Stewart, Math.
    /// Comp. 30 (1976) 772-795): `6 dim (rank - index)` flops in one read and write of the basis from row
    /// `index` on, nothing at all for the last vector. One row of the basis, another each time, is then
    /// measured against the others and mended where rounding has added up.
    ///
    /// # Errors
    /// [`Error::Parameter`] where there is no such vector.
    pub fn drop(&mut self, index: usize) -> Result<(), Error> {
        if index >= self.rank {
            return Err(Error::Parameter {
                name: "index",
                expected: format!("below the rank, {}", self.rank),
                got: index.to_string(),
            });
        }
        let turned = index + 1 < self.rank;
        self.r.remove(index, &mut self.rotations);
        let (rows, stride) = self.q.parts_mut();
        ops::rotate_chain(rows, stride, self.w.len(), index, &self.rotations);
        self.rank -= 1;
        if turned {
            self.cursor = (self.cursor + 1) % self.rank;
            self.mend(self.cursor);
        }
        Ok(())
    }

    /// Measures row `index` against the others and makes it orthonormal to them again where it is not.
    fn mend(&mut self, index: usize) {
        for (target, value) in self.w.iter_mut().zip(self.q.row(index)) {
            *target = value.to_f64();
        }
        for buffer in [&mut self.h, &mut self.s] {
            buffer.resize(self.rank, 0.0);
        }
        let q = self.q.view(self.rank);
        let squares = ops::project(q, &self.w, &mut self.h);
        self.h[index] = 0.0;
        let loss = self.h.iter().map(|h| h * h).sum::<f64>().sqrt();
        let limit = MEND_LIMIT * T::EPSILON;
        if loss > limit || (squares - 1.0).abs() > limit {
            let squares = ops::subtract_measured_in_place(q, &self.h, &mut self.w, &mut self.s);
            ops::normalize_into(squares.sqrt(), &self.w, self.q.row_mut(index));
        }
    }
}

/// Measured loss of a row, in units of eps, from which on it is mended: above what a fresh vector may show, so
/// that rotations alone do not set it off.
const MEND_LIMIT: f64 = 4.0 * LOSS_LIMIT;
