//! The largest eigenvalue, with its vector, of a symmetric tridiagonal matrix that grows a row at a time.

/// Newton steps at most; from a bound above, some five are taken.
const STEPS: usize = 100;

/// A growing symmetric tridiagonal matrix, its largest eigenvalue and the vector of it.
#[derive(Clone, Debug)]
pub(super) struct Tridiagonal {
    diagonal: Vec<f64>,
    /// Entry `i` couples rows `i` and `i + 1`; the last one is not yet in the matrix.
    beside: Vec<f64>,
    /// The largest eigenvalue, or a bound on it from above where rows were added since it was found.
    largest: f64,
    /// Least that the last entry of the vector can be, relative to its first.
    reach: f64,
    /// Pivots of `largest I - T`, eliminated from the top and from the bottom.
    down: Vec<f64>,
    up: Vec<f64>,
    vector: Vec<f64>,
}

impl Tridiagonal {
    pub(super) fn with_room(limit: usize) -> Self {
        Self {
            diagonal: Vec::with_capacity(limit),
            beside: Vec::with_capacity(limit),
            largest: 0.0,
            reach: 1.0,
            down: vec![0.0; limit],
            up: vec![0.0; limit],
            vector: vec![0.0; limit],
        }
    }

    /// Back to no rows.
    pub(super) fn clear(&mut self) {
        self.diagonal.clear();
        self.beside.clear();
        self.largest = 0.0;
        self.reach = 1.0;
    }

    /// One row more: its diagonal entry, and the entry that will couple it to the row after it.
    pub(super) fn push(&mut self, diagonal: f64, beside: f64) {
        if let Some(&before) = self.beside.last() {
            // The bound of the two by two matrix of the block before and this row.
            let half = 0.5 * (self.largest - diagonal);
            let bound = 0.5 * (self.largest + diagonal) + (half * half + before * before).sqrt();
            self.largest = bound * (1.0 + 8.0 * f64::EPSILON);
            self.reach *= (before / (self.largest - diagonal)).min(1.0);
        } else {
            self.largest = diagonal;
        }
        self.diagonal.push(diagonal);
        self.beside.push(beside);
    }

    /// Whether what couples the vector to a row not yet in the matrix may be as little as `share` of the eigenvalue:
    /// an estimate that costs nothing and errs on the side of yes.
    pub(super) fn may_couple_below(&self, share: f64) -> bool {
        self.beside.last().is_none_or(|beside| beside * self.reach <= share * self.largest)
    }

    /// The unit vector found by the last [`Self::largest`].
    pub(super) fn vector(&self) -> &[f64] {
        &self.vector[..self.diagonal.len()]
    }

    /// Finds the largest eigenvalue.
    ///
    /// Newton's iteration on the characteristic polynomial, from above, where it falls monotonically; then the vector
    /// by a factorization twisted at the smallest pivot (Parlett & Dhillon, Linear Algebra Appl. 267 (1997) 247-279),
    /// which is accurate in its small entries too: the last one decides whether to stop.
    pub(super) fn largest(&mut self) -> f64 {
        let size = self.diagonal.len();
        let mut value = self.largest;
        for _ in 0..STEPS {
            let Some(step) = self.newton(value) else { break };
            value -= step;
            if step <= 4.0 * f64::EPSILON * value {
                break;
            }
        }
        self.largest = value;
        self.eliminate(value);
        let twist = (0..size)
            .min_by(|&a, &b| self.gap_at(a, value).total_cmp(&self.gap_at(b, value)))
            .unwrap_or_default();
        let x = &mut self.vector[..size];
        x.fill(0.0);
        x[twist] = 1.0;
        for row in (0..twist).rev() {
            x[row] = x[row + 1] * self.beside[row] / self.down[row];
            keep_in_range(x, row);
        }
        for row in twist + 1..size {
            x[row] = x[row - 1] * self.beside[row - 1] / self.up[row];
            keep_in_range(x, row);
        }
        let norm = x.iter().map(|entry| entry * entry).sum::<f64>().sqrt();
        for entry in x {
            *entry /= norm;
        }
        value
    }

    /// Newton's step down from `value`; None where `value` is no longer above.
    fn newton(&self, value: f64) -> Option<f64> {
        let (mut pivot, mut slope, mut sum) = (f64::INFINITY, 0.0, 0.0);
        for (row, &diagonal) in self.diagonal.iter().enumerate() {
            let beside = if row == 0 { 0.0 } else { self.beside[row - 1] };
            let ratio = beside / pivot;
            slope = 1.0 + ratio * ratio * slope;
            pivot = value - diagonal - beside * ratio;
            if pivot <= 0.0 {
                return None;
            }
            sum += slope / pivot;
        }
        Some(sum.recip())
    }

    /// Pivots from both ends; a vanishing one is moved off zero by rounding.
    fn eliminate(&mut self, value: f64) {
        let size = self.diagonal.len();
        let off_zero = |pivot: f64| pivot.max(f64::EPSILON * f64::EPSILON * value).max(f64::MIN_POSITIVE);
        for row in 0..size {
            let carried = if row == 0 { 0.0 } else { self.beside[row - 1].powi(2) / self.down[row - 1] };
            self.down[row] = off_zero(value - self.diagonal[row] - carried);
        }
        for row in (0..size).rev() {
            let carried = if row + 1 == size { 0.0 } else { self.beside[row].powi(2) / self.up[row + 1] };
            self.up[row] = off_zero(value - self.diagonal[row] - carried);
        }
    }

    /// The pivot that remains where the two eliminations meet in `row`.
    fn gap_at(&self, row: usize, value: f64) -> f64 {
        (self.down[row] + self.up[row] - (value - self.diagonal[row])).abs()
    }
}

/// Largest entry of a vector before it is normalized: its square and a step from it stay in range.
const LARGEST_ENTRY: f64 = 1e100;

/// Scales `x` down where its entry `row`, the one found last, has grown out of range: pivots near zero in a row, which
/// eigenvalues that all but coincide bring, multiply.
fn keep_in_range(x: &mut [f64], row: usize) {
    if x[row].abs() > LARGEST_ENTRY {
        let scale = x[row].abs().recip();
        for entry in x {
            *entry *= scale;
        }
    }
}
