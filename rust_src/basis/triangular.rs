//! The triangular factor, packed a column at a time, so that a new vector appends and moves nothing.

/// Upper triangular, diagonal positive.
#[derive(Clone, Debug, Default)]
pub(super) struct Triangular {
    packed: Vec<f64>,
    order: usize,
}

/// Where column `index` starts: after columns of 1, 2, ..., `index` entries.
fn start(index: usize) -> usize {
    index * (index + 1) / 2
}

impl Triangular {
    /// Empty, with room for `order` columns.
    pub fn with_capacity(order: usize) -> Self {
        Self { packed: Vec::with_capacity(start(order)), order: 0 }
    }

    /// The `index + 1` entries of column `index` down to the diagonal.
    pub fn column(&self, index: usize) -> &[f64] {
        &self.packed[start(index)..=start(index) + index]
    }

    /// Appends a column: what stands above the diagonal, and the diagonal.
    pub fn push(&mut self, above: &[f64], diagonal: f64) {
        self.packed.extend_from_slice(above);
        self.packed.push(diagonal);
        self.order += 1;
    }

    /// Removes column `index` and restores the triangle by plane rotations of neighbouring rows, from the top:
    /// rotation `i` of the answer turns rows `index + i` and `index + i + 1`, `(x, y) <- (c x + s y, c y - s x)`.
    /// Its last row is then zero and is cut off. `3 (order - index)^2` flops.
    pub fn remove(&mut self, index: usize, rotations: &mut Vec<(f64, f64)>) {
        rotations.clear();
        for column in index + 1..self.order {
            let (from, to) = (start(column), start(column - 1));
            // Down to row `index` nothing turns.
            self.packed.copy_within(from..from + index, to);
            let mut carried = self.packed[from + index];
            for (step, &(c, s)) in rotations.iter().enumerate() {
                let below = self.packed[from + index + step + 1];
                self.packed[to + index + step] = c * carried + s * below;
                carried = c * below - s * carried;
            }
            let below = self.packed[from + column];
            let diagonal = carried.hypot(below);
            rotations.push((carried / diagonal, below / diagonal));
            self.packed[to + column - 1] = diagonal;
        }
        self.order -= 1;
        self.packed.truncate(start(self.order));
    }

    /// Solves `R x = y` in place, from the bottom up: `order^2` flops.
    pub fn solve(&self, y: &mut [f64]) {
        for index in (0..self.order).rev() {
            let column = self.column(index);
            y[index] /= column[index];
            let weight = y[index];
            for (target, entry) in y[..index].iter_mut().zip(column) {
                *target -= weight * entry;
            }
        }
    }

    /// The whole triangle, row-major, zeros below.
    pub fn to_dense(&self) -> Vec<f64> {
        let mut dense = vec![0.0; self.order * self.order];
        for index in 0..self.order {
            for (row, &entry) in self.column(index).iter().enumerate() {
                dense[row * self.order + index] = entry;
            }
        }
        dense
    }
}
