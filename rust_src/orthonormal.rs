//! How orthonormal a set of rows is, and mending one that is not.

use crate::dense::Svd;
use crate::error::Error;
use crate::ops::{self, End};
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;

/// Measured loss of a row, in units of eps, from which on it is mended: above what a fresh vector may show, so
/// that the rounding of one rotation alone does not set it off.
const MEND_LIMIT: f64 = 4.0;

/// Spectral norm of `I - Q Q^T`; `count^2 dim` flops.
///
/// # Errors
/// [`Error::NoConvergence`], never seen.
pub fn orthogonality_error<T: Scalar>(q: Rows<'_, T>) -> Result<f64, Error> {
    let count = q.count();
    let mut defect = vec![0.0; count * count];
    let mut row = vec![0.0; q.dim()];
    let mut products = vec![0.0; count];
    for (index, entries) in q.iter().enumerate() {
        row.iter_mut().zip(entries).for_each(|(target, value)| *target = value.to_f64());
        ops::project(q, &row, &mut products);
        products[index] -= 1.0;
        defect[index * count..][..count].copy_from_slice(&products);
    }
    let mut svd = Svd::new(count, count);
    svd.decompose(&defect)?;
    Ok(svd.values().first().copied().unwrap_or(0.0))
}

/// Frobenius norm of `I - Q Q^T`: the spectral norm or more, and at most `sqrt(count)` times it. `2 count^2 dim` flops and
/// no decomposition; room for a row.
pub(crate) fn orthogonality_bound<T: Scalar>(q: Rows<'_, T>) -> f64 {
    let mut row = vec![0.0; q.dim()];
    let mut products = vec![0.0; q.count()];
    let mut squares = 0.0;
    for (index, entries) in q.iter().enumerate() {
        row.iter_mut().zip(entries).for_each(|(target, value)| *target = value.to_f64());
        ops::project(q, &row, &mut products);
        products[index] -= 1.0;
        squares += products.iter().map(|product| product * product).sum::<f64>();
    }
    squares.sqrt()
}

/// Room to mend a row.
#[derive(Clone, Debug)]
pub(crate) struct Mender {
    /// The row whose turn was last.
    turn: usize,
    h: Vec<f64>,
    s: Vec<f64>,
    w: Vec<f64>,
}

impl Mender {
    /// Room for `count` rows of `dim` entries.
    pub fn with_room(count: usize, dim: usize) -> Self {
        Self { turn: 0, h: Vec::with_capacity(count), s: Vec::with_capacity(count), w: vec![0.0; dim] }
    }

    /// The row measured last: the state of the mender, the rest is room.
    pub fn turn(&self) -> usize {
        self.turn
    }

    /// Goes on after row `turn`.
    pub fn go_on_after(&mut self, turn: usize) {
        self.turn = turn;
    }

    /// Measures one of the first `count` rows, the next in turn, against the others, and makes it orthonormal to
    /// them again where rounding has added up. One sweep, `2 count dim` flops; three times that where it mends.
    /// The sweep starts at `end`.
    pub fn take_turn<T: Scalar>(&mut self, q: &mut RowStore<T>, count: usize, end: End) {
        if count == 0 {
            return;
        }
        self.turn = if self.turn + 1 < count { self.turn + 1 } else { 0 };
        let index = self.turn;
        self.w.iter_mut().zip(q.row(index)).for_each(|(target, value)| *target = value.to_f64());
        self.h.resize(count, 0.0);
        self.s.resize(count, 0.0);
        let squares = ops::project_from(end, q.view(count), &self.w, &mut self.h);
        self.h[index] = 0.0;
        let loss = self.h.iter().map(|h| h * h).sum::<f64>().sqrt();
        let limit = MEND_LIMIT * T::EPSILON;
        if loss > limit || (squares - 1.0).abs() > limit {
            let squares = ops::subtract_measured_in_place(q.view(count), &self.h, &mut self.w, &mut self.s);
            ops::normalize_into(squares.sqrt(), &self.w, q.row_mut(index));
        }
    }
}
