//! The growing orthonormal basis.
//!
//! Vector by vector, `A = (a_1, a_2, ...)` becomes `a_j = sum_i R[i, j] q_i` with `Q Q^T = I` and `R` upper
//! triangular, diagonal positive. A vector costs two sweeps over the basis: `h = Q v`, then `w = v - Q^T h` with
//! `s = Q w` measured while each block of `w` and `Q` is still in cache. Where the measured loss `|s| / |w|` is
//! above [`LOSS_LIMIT`] the vector is swept again, so orthonormality rests on a measurement, not on the conditioning of
//! what was added. (The classical algorithm applied twice is enough: Giraud, Langou, Rozloznik, van den Eshof,
//! Numer. Math. 101 (2005) 87-100; here "twice" is decided by looking.)

mod block;
mod drop;
mod grow;
mod orthogonalize;
mod solve;
mod state;
mod triangular;

pub use block::BLOCK_ROWS;
pub use grow::{Reason, Step};
pub use orthogonalize::{LOSS_LIMIT, Split};
pub(crate) use orthogonalize::{Measured, clean};
pub use solve::Solution;

use crate::error::Error;
use crate::memory::check_room;
use crate::orthonormal::{Mender, orthogonality_error};
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;
use triangular::Triangular;

/// Rows made room for at first where no capacity is given.
const FIRST_ROWS: usize = 8;

/// When a vector counts as dependent: its residual norm is at most `max(relative |v|, absolute)`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tolerance {
    /// Relative to the norm of the vector.
    pub relative: f64,
    /// In the unit of the vector.
    pub absolute: f64,
}

impl Tolerance {
    /// `dim * eps` relative, nothing absolute: the rounding a vector of that length carries anyway.
    #[must_use]
    pub fn of_rounding<T: Scalar>(dim: usize) -> Self {
        Self { relative: dim as f64 * T::EPSILON, absolute: 0.0 }
    }
}

/// An orthonormal basis that grows a vector at a time, with the triangular factor of what was added.
#[derive(Clone, Debug)]
pub struct Basis<T> {
    q: RowStore<T>,
    r: Triangular,
    rank: usize,
    capacity: Option<usize>,
    tolerance: Tolerance,
    /// Measures a row after a drop.
    mender: Mender,
    /// Room for many vectors at once.
    block: block::Workspace,
    /// Plane rotations of the last drop.
    rotations: Vec<(f64, f64)>,
    /// Coefficients of the last vector, in its unit; `rank` of them count.
    h: Vec<f64>,
    /// Measured coefficients of the last residual.
    s: Vec<f64>,
    /// The correction before it.
    correction: Vec<f64>,
    /// Residual of the last vector.
    w: Vec<f64>,
    /// The last vector brought into the range where squares are safe.
    scaled: Vec<f64>,
}

impl<T: Scalar> Basis<T> {
    /// An empty basis for vectors of `dim` entries. With `capacity` it holds that many vectors at most and
    /// allocates nothing from here on; without, it grows as needed, to `dim` at most.
    ///
    /// # Errors
    /// [`Error::Parameter`] where `dim` is 0, `capacity` exceeds it, or a tolerance is negative or not a number;
    /// [`Error::Memory`].
    pub fn new(dim: usize, capacity: Option<usize>, tolerance: Option<Tolerance>) -> Result<Self, Error> {
        let tolerance = tolerance.unwrap_or_else(|| Tolerance::of_rounding::<T>(dim));
        check_settings(dim, capacity, tolerance)?;
        Self::with_room(dim, capacity, tolerance, capacity.unwrap_or(FIRST_ROWS.min(dim)))
    }

    /// An empty basis with room for `room` vectors, made of settings that have been checked.
    fn with_room(
        dim: usize,
        capacity: Option<usize>,
        tolerance: Tolerance,
        room: usize,
    ) -> Result<Self, Error> {
        // Rows, triangle and workspace.
        check_room(dim.saturating_add(room), room.saturating_add(4))?;
        Ok(Self {
            q: RowStore::zeros(room, dim),
            r: Triangular::with_capacity(room),
            rank: 0,
            capacity,
            tolerance,
            mender: Mender::with_room(room, dim),
            block: block::Workspace::default(),
            rotations: Vec::with_capacity(room),
            h: vec![0.0; room],
            s: vec![0.0; room],
            correction: vec![0.0; room],
            w: vec![0.0; dim],
            scaled: vec![0.0; dim],
        })
    }

    /// Entries a vector.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.q.dim()
    }

    /// Vectors held.
    #[must_use]
    pub fn rank(&self) -> usize {
        self.rank
    }

    /// The most vectors it can hold.
    #[must_use]
    pub fn capacity(&self) -> usize {
        self.capacity.unwrap_or(self.dim())
    }

    /// When a vector counts as dependent.
    #[must_use]
    pub fn tolerance(&self) -> Tolerance {
        self.tolerance
    }

    /// The orthonormal rows, `rank` by `dim`.
    #[must_use]
    pub fn vectors(&self) -> Rows<'_, T> {
        self.q.view(self.rank)
    }

    /// The triangular factor, `rank` by `rank`, row-major: vector `j` is `sum_i R[i, j] q_i`.
    #[must_use]
    pub fn triangular(&self) -> Vec<f64> {
        self.r.to_dense()
    }

    /// Spectral norm of `I - Q Q^T`, computed now; `2 rank^2 dim` flops.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen.
    pub fn orthogonality_error(&self) -> Result<f64, Error> {
        orthogonality_error(self.vectors())
    }

    /// Coefficients of the vector last added or split, on the basis as it was then.
    #[must_use]
    pub fn coefficients(&self) -> &[f64] {
        &self.h
    }

    /// Residual of the vector last added or split, orthogonal to the basis as it was then.
    #[must_use]
    pub fn residual(&self) -> &[f64] {
        &self.w
    }

    /// Makes room for one row more.
    fn make_room(&mut self) {
        if self.rank == self.q.rows() {
            let room = (2 * self.rank).max(FIRST_ROWS).min(self.capacity());
            self.q.grow(room);
        }
    }
}

/// Checks the ranges of what a basis is made with.
fn check_settings(dim: usize, capacity: Option<usize>, tolerance: Tolerance) -> Result<(), Error> {
    if dim == 0 {
        return Err(Error::Parameter { name: "dim", expected: "at least 1".into(), got: "0".into() });
    }
    if let Some(capacity) = capacity.filter(|&capacity| capacity > dim) {
        return Err(Error::Parameter {
            name: "capacity",
            expected: format!("at most dim = {dim}: no more vectors can be independent"),
            got: capacity.to_string(),
        });
    }
    for (name, value) in [("tolerance", tolerance.relative), ("absolute tolerance", tolerance.absolute)] {
        if !(value >= 0.0 && value.is_finite()) {
            return Err(Error::Parameter {
                name,
                expected: "a finite number, 0 or more".into(),
                got: value.to_string(),
            });
        }
    }
    Ok(())
}
