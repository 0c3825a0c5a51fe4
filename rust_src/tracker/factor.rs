//! The small triangular factor `R` of the tracked rows `R Q`, and the changes a tick makes to it.
//!
//! All are plane rotations of rows, `O(k^2)` flops; nothing is ever squared, so an energy `1e-12` of the largest
//! keeps its digits.

use crate::ops;

/// Entries below this are taken as zero: their squares, the energies, would be subnormal.
const VANISHED: f64 = 1e-150;
/// From this length on the sweeps' own product is the faster one.
const WIDE: usize = 24;

/// Upper triangular, row-major, with room for one row and column more than is kept from tick to tick.
#[derive(Clone, Debug)]
pub(super) struct Factor {
    entries: Vec<f64>,
    stride: usize,
    size: usize,
}

impl Factor {
    /// Room for `limit` rows and columns.
    pub(super) fn with_room(limit: usize) -> Self {
        Self { entries: vec![0.0; limit * limit], stride: limit, size: 0 }
    }

    /// Takes a triangle of order `size`, within the room, given row-major.
    pub(super) fn restore(&mut self, size: usize, square: &[f64]) {
        self.size = size;
        for (row, entries) in square.chunks_exact(size.max(1)).enumerate() {
            self.entries[row * self.stride..][..size].copy_from_slice(entries);
        }
    }

    /// All zero, of the same size.
    pub(super) fn clear(&mut self) {
        self.entries.fill(0.0);
    }

    /// Writes it, times `scale`, as a full square, row-major.
    pub(super) fn write(&self, scale: f64, square: &mut [f64]) {
        square.fill(0.0);
        for (row, out) in square.chunks_exact_mut(self.size.max(1)).enumerate() {
            for (target, entry) in out[row..].iter_mut().zip(self.tail(row)) {
                *target = scale * entry;
            }
        }
    }

    /// Rows, which are also columns.
    pub(super) fn size(&self) -> usize {
        self.size
    }

    /// Row `index` from the diagonal on.
    pub(super) fn tail(&self, index: usize) -> &[f64] {
        &self.entries[index * self.stride..][index..self.size]
    }

    /// Sum of squares: the energy tracked, times the total weight.
    pub(super) fn energy(&self) -> f64 {
        (0..self.size).map(|row| self.tail(row).iter().map(|entry| entry * entry).sum::<f64>()).sum()
    }

    /// Multiplies all by `factor`, at most 1, and lets vanish what has decayed out of range.
    pub(super) fn decay(&mut self, factor: f64) {
        for row in 0..self.size {
            for entry in &mut self.entries[row * self.stride..][row..self.size] {
                let value = *entry * factor;
                *entry = if value.abs() < VANISHED { 0.0 } else { value };
            }
        }
    }

    /// Takes in one more row, `size` entries, which is used up: `R^T R` gains its square.
    pub(super) fn append(&mut self, row: &mut [f64]) {
        for index in 0..self.size {
            let pivot = &mut self.entries[index * self.stride..][index..self.size];
            let rest = &mut row[index..self.size];
            if rest[0] == 0.0 {
                continue;
            }
            let (c, s, norm) = rotation(pivot[0], rest[0]);
            pivot[0] = norm;
            turn(&mut pivot[1..], &mut rest[1..], c, s);
        }
    }

    /// Takes in one more row that reaches into one more column: `size + 1` entries, which are used up.
    pub(super) fn border(&mut self, row: &mut [f64]) {
        let last = self.size;
        self.size += 1;
        for index in 0..self.size {
            self.entries[index * self.stride + last] = 0.0;
        }
        self.append(row);
    }

    /// The entries, row-major, and the distance between rows.
    pub(super) fn entries(&self) -> (&[f64], usize) {
        (&self.entries, self.stride)
    }

    /// `R x`.
    pub(super) fn apply(&self, x: &[f64], image: &mut [f64]) {
        for (index, out) in image[..self.size].iter_mut().enumerate() {
            *out = dot(self.tail(index), &x[index..self.size]);
        }
    }

    /// `R^T x`.
    pub(super) fn apply_transposed(&self, x: &[f64], image: &mut [f64]) {
        image[..self.size].fill(0.0);
        for (index, &factor) in x[..self.size].iter().enumerate() {
            for (out, entry) in image[index..].iter_mut().zip(self.tail(index)) {
                *out += factor * entry;
            }
        }
    }

    /// Adds `share` of the last column.
    pub(super) fn add_last_column(&self, share: f64, image: &mut [f64]) {
        let last = self.entries[self.size - 1..].iter().step_by(self.stride);
        for (out, entry) in image[..self.size].iter_mut().zip(last) {
            *out += share * entry;
        }
    }

    /// Columns reflected by `I - 2 u u^T`, the last of them cut off, rows rotated back to triangular form.
    ///
    /// The reflected matrix is `R - 2 (R u) u^T`: one sweep of rotations from below turns `R u` into a multiple of the
    /// first unit vector and leaves one diagonal below the main one, the rank-one change then touches the first
    /// row only, and a second sweep from above clears that diagonal. `image` is `R u` and is used up. About `6 k^2`
    /// flops.
    pub(super) fn cut(&mut self, u: &[f64], image: &mut [f64]) {
        let kept = self.size - 1;
        for index in (0..kept).rev() {
            if image[index + 1] == 0.0 {
                self.entries[(index + 1) * self.stride + index] = 0.0;
                continue;
            }
            let (c, s, norm) = rotation(image[index], image[index + 1]);
            image[index] = norm;
            let (upper, lower) = self.pair(index, kept);
            lower[0] = 0.0;
            turn(upper, lower, c, s);
        }
        for (entry, &last) in self.entries[..kept].iter_mut().zip(u) {
            *entry -= 2.0 * image[0] * last;
        }
        for index in 0..kept {
            let (upper, lower) = self.pair(index, kept);
            if lower[0] == 0.0 {
                continue;
            }
            let (c, s, norm) = rotation(upper[0], lower[0]);
            (upper[0], lower[0]) = (norm, 0.0);
            turn(&mut upper[1..], &mut lower[1..], c, s);
        }
        self.size = kept;
    }

    /// Rows `index` and the next, columns `index` to `columns`.
    fn pair(&mut self, index: usize, columns: usize) -> (&mut [f64], &mut [f64]) {
        let (head, rest) = self.entries[index * self.stride..].split_at_mut(self.stride);
        (&mut head[index..columns], &mut rest[index..columns])
    }
}

/// Sum of products of two short vectors of equal length, in chains that do not wait for one another.
pub(super) fn dot(x: &[f64], y: &[f64]) -> f64 {
    if x.len() >= WIDE {
        return ops::dot(x, y);
    }
    let (fours, rest) = x.as_chunks::<4>();
    let (others, last) = y.as_chunks::<4>();
    let mut sums = [0.0; 4];
    for (a, b) in fours.iter().zip(others) {
        for (sum, (a, b)) in sums.iter_mut().zip(a.iter().zip(b)) {
            *sum += a * b;
        }
    }
    let tail: f64 = rest.iter().zip(last).map(|(a, b)| a * b).sum();
    (sums[0] + sums[1]) + (sums[2] + sums[3]) + tail
}

/// Cosine, sine and norm of the rotation that turns `(a, b)` into `(norm, 0)`; `b` is not zero.
fn rotation(a: f64, b: f64) -> (f64, f64, f64) {
    let norm = (a * a + b * b).sqrt();
    if norm < VANISHED {
        let norm = a.hypot(b);
        return (a / norm, b / norm, norm);
    }
    let scale = norm.recip();
    (a * scale, b * scale, norm)
}

/// `(x, y) <- (c x + s y, c y - s x)`.
fn turn(x: &mut [f64], y: &mut [f64], c: f64, s: f64) {
    for (a, b) in x.iter_mut().zip(y) {
        let (first, second) = (*a, *b);
        *a = c * first + s * second;
        *b = c * second - s * first;
    }
}
