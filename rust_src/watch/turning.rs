//! Singular values and vectors a few rotations at a time.
//!
//! Rows are turned in pairs until all are orthogonal to each other (Hestenes, J. SIAM 6 (1958) 51-90): their norms are then
//! the singular values, their directions the right singular vectors, small ones as accurate as large ones. Unlike a
//! decomposition by a library it can stop after any pair and go on at the next tick.

use crate::error::Error;
use crate::ops;
use crate::rows::RowStore;
use crate::state::{Part, Reader, Writer};

/// Cosine between two rows, in units of eps a row, up to which they count as orthogonal.
const ORTHOGONAL: f64 = 2.0;
/// Sweeps at most; six are usual.
const SWEEPS: u32 = 30;

/// Rows on their way to being orthogonal.
#[derive(Clone, Debug)]
pub(super) struct Turning {
    /// The rows.
    pub(super) rows: RowStore<f64>,
    count: usize,
    squares: Vec<f64>,
    first: usize,
    second: usize,
    turned: bool,
    sweeps: u32,
}

impl Turning {
    /// Room for `limit` rows of `dim` entries.
    pub(super) fn with_room(limit: usize, dim: usize) -> Self {
        Self {
            rows: RowStore::zeros(limit, dim),
            count: 0,
            squares: vec![0.0; limit],
            first: 0,
            second: 1,
            turned: false,
            sweeps: 0,
        }
    }

    /// Rows it has room for, and their entries.
    fn room(&self) -> (usize, usize) {
        (self.squares.len(), self.rows.dim())
    }

    /// Starts on the first `count` rows, which the caller has written.
    pub(super) fn begin(&mut self, count: usize) {
        self.count = count;
        for (index, square) in self.squares[..count].iter_mut().enumerate() {
            *square = ops::norm_squared(self.rows.row(index));
        }
        (self.first, self.second, self.turned, self.sweeps) = (0, 1, false, 0);
    }

    /// Squared singular values, in the order of the rows.
    pub(super) fn squares(&self) -> &[f64] {
        &self.squares[..self.count]
    }

    /// Looks at `pairs` more pairs; true when all are orthogonal.
    pub(super) fn advance(&mut self, pairs: usize) -> bool {
        if self.count < 2 {
            return true;
        }
        for _ in 0..pairs {
            self.turn(self.first, self.second);
            self.second += 1;
            if self.second < self.count {
                continue;
            }
            self.first += 1;
            self.second = self.first + 1;
            if self.second < self.count {
                continue;
            }
            self.sweeps = self.sweeps.saturating_add(1);
            let done = !self.turned || self.sweeps >= SWEEPS;
            (self.first, self.second, self.turned) = (0, 1, false);
            if done {
                // Norms updated through many rotations have lost digits where they became small.
                for (index, square) in self.squares[..self.count].iter_mut().enumerate() {
                    *square = ops::norm_squared(self.rows.row(index));
                }
                return true;
            }
        }
        false
    }

    fn turn(&mut self, first: usize, second: usize) {
        let product = ops::dot(self.rows.row(first), self.rows.row(second));
        let (a, b) = (self.squares[first], self.squares[second]);
        let tolerance = ORTHOGONAL * self.count as f64 * f64::EPSILON;
        if product.abs() <= tolerance * (a * b).sqrt() || product == 0.0 {
            return;
        }
        self.turned = true;
        let zeta = (b - a) / (2.0 * product);
        let t = zeta.signum() / (zeta.abs() + zeta.hypot(1.0));
        let c = t.hypot(1.0).recip();
        let (x, y) = self.rows.pair_mut(first, second);
        ops::rotate(x, y, c, -t * c);
        self.squares[first] = (a - t * product).max(0.0);
        self.squares[second] = (b + t * product).max(0.0);
    }
}

impl Part for Turning {
    fn write(&self, to: &mut Writer) {
        let Self { rows, count, squares, first, second, turned, sweeps } = self;
        to.rows("rows", rows.view(*count), squares.len());
        to.word("count", count);
        to.numbers("squares", &squares[..*count]);
        to.word("first", first);
        to.word("second", second);
        to.word("turned", turned);
        to.word("sweeps", sweeps);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let (limit, dim) = self.room();
        self.rows = from.rows("rows", limit, dim)?;
        self.count = from.at_most("count", limit)?;
        let squares = from.amounts("squares", self.count)?;
        self.squares[..self.count].copy_from_slice(&squares);
        // The next pair: two rows, the second after the first.
        self.second = from.at_most("second", self.count.saturating_sub(1).max(1))?;
        self.first = from.at_most("first", self.second - self.second.min(1))?;
        if self.second == 0 {
            return Err(from.unlike("second", "a row after the first", "0"));
        }
        self.turned = from.parse("turned")?;
        self.sweeps = from.parse("sweeps")?;
        Ok(())
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
mod tests {
    use super::*;
    use crate::dense::Svd;

    #[test]
    fn singular_values_agree_with_the_library_over_twelve_decades() {
        let n = 9;
        let mut turning = Turning::with_room(n, n);
        let mut matrix = Vec::new();
        for row in 0..n {
            let scale = 10_f64.powf(-1.5 * row as f64);
            for column in 0..n {
                let entry = scale * (1.0 + (row * 7 + column * column * 3 + 1) as f64).sin();
                turning.rows.row_mut(row)[column] = entry;
                matrix.push(entry);
            }
        }
        turning.begin(n);
        let mut rounds = 0;
        while !turning.advance(5) {
            rounds += 1;
        }
        assert!(rounds > 5);
        let mut squares = turning.squares().to_vec();
        squares.sort_by(|a, b| b.total_cmp(a));
        let mut svd = Svd::new(n, n);
        svd.decompose(&matrix).unwrap();
        for (square, value) in squares.iter().zip(svd.values()) {
            // The library is accurate to eps of the largest value.
            let tolerance = 32.0 * f64::EPSILON * svd.values()[0];
            assert!((square.sqrt() - value).abs() < tolerance, "{} {value}", square.sqrt());
        }
    }

    #[test]
    fn zero_and_equal_rows_are_no_obstacle() {
        let mut turning = Turning::with_room(4, 3);
        for (row, entries) in [[1.0, 2.0, 3.0], [1.0, 2.0, 3.0], [0.0; 3], [0.0, 1.0, 0.0]].iter().enumerate()
        {
            turning.rows.row_mut(row).copy_from_slice(entries);
        }
        turning.begin(4);
        while !turning.advance(1) {}
        let sum: f64 = turning.squares().iter().sum();
        assert!((sum - 29.0).abs() < 64.0 * f64::EPSILON * 29.0);
        assert!(turning.squares().iter().filter(|square| **square < 1e-28).count() >= 2);
    }
}
