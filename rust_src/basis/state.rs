//! The state of a basis: vectors, triangle, settings, and whose turn it is to be mended.
//!
//! One read back has room for the vectors it holds and, whatever its capacity, grows as one without: a capacity is a word in
//! a file, and no reason to take memory.

use super::triangular::Triangular;
use super::{Basis, Tolerance, check_settings};
use crate::error::Error;
use crate::scalar::Scalar;
use crate::state::{Reader, State, Writer, check_orthonormal};

impl<T: Scalar> State for Basis<T> {
    const CLASS: &'static str = "Basis";
    const DTYPE: &'static str = T::NAME;

    fn write(&self, to: &mut Writer) {
        // Every field has a name here, so that a new one is thought of; those that are dropped are workspace.
        let Self {
            q,
            r,
            rank,
            capacity,
            tolerance,
            mender,
            block: _,
            rotations: _,
            h: _,
            s: _,
            correction: _,
            w: _,
            scaled: _,
        } = self;
        let Tolerance { relative, absolute } = tolerance;
        to.word("dim", q.dim());
        to.optional("capacity", *capacity);
        to.number("tolerance.relative", *relative);
        to.number("tolerance.absolute", *absolute);
        to.word("turn", mender.turn());
        to.triangle("triangular", *rank, |row, column| r.column(column)[row]);
        // One row at least: a row is what the workspace takes.
        to.rows("vectors", q.view(*rank), 1);
    }

    fn read(from: &mut Reader<'_>) -> Result<Self, Error> {
        let dim = from.parse("dim")?;
        let capacity = from.optional("capacity")?;
        let tolerance = Tolerance {
            relative: from.parse("tolerance.relative")?,
            absolute: from.parse("tolerance.absolute")?,
        };
        check_settings(dim, capacity, tolerance)?;
        let (rank, square) = from.triangle("triangular", capacity.unwrap_or(dim))?;
        let mut r = Triangular::with_capacity(rank);
        let mut above = Vec::with_capacity(rank);
        for column in 0..rank {
            let diagonal = square[column * rank + column];
            if diagonal <= 0.0 {
                return Err(from.unlike("triangular", "a positive diagonal", &diagonal.to_string()));
            }
            above.clear();
            above.extend((0..column).map(|row| square[row * rank + column]));
            r.push(&above, diagonal);
        }
        let q = from.rows("vectors", rank.max(1), dim)?;
        check_orthonormal(&from.name("vectors"), q.view(rank))?;
        let mut basis = Self::with_room(dim, capacity, tolerance, 0)?;
        basis.mender.go_on_after(from.at_most("turn", dim)?);
        Ok(Self { q, r, rank, ..basis })
    }
}
