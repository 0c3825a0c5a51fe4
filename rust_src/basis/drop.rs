//! Forgetting an accepted vector.

use super::Basis;
use crate::error::Error;
use crate::ops;
use crate::ops::End;
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
            self.mender.take_turn(&mut self.q, self.rank, End::Front);
        }
        Ok(())
    }
}
