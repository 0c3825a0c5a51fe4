//! A small symmetric positive definite system, in place, without allocation.

/// Lower triangle, row-major.
#[derive(Clone, Debug)]
pub struct Cholesky {
    size: usize,
    lower: Vec<f64>,
    work: Vec<f64>,
}

impl Cholesky {
    /// For systems of `size` unknowns.
    #[must_use]
    pub fn new(size: usize) -> Self {
        Self { size, lower: vec![0.0; size * size], work: vec![0.0; size] }
    }

    /// All entries zero.
    pub fn clear(&mut self) {
        self.lower.fill(0.0);
    }

    /// Sets entry (`row`, `column`), `column <= row`.
    pub fn set(&mut self, row: usize, column: usize, value: f64) {
        self.lower[row * self.size + column] = value;
    }

    /// Adds to a diagonal entry.
    pub fn add_to_diagonal(&mut self, row: usize, value: f64) {
        self.lower[row * self.size + row] += value;
    }

    /// Factors the matrix set; false where it is not positive definite. `size^3 / 3` flops.
    pub fn factor(&mut self) -> bool {
        let n = self.size;
        for row in 0..n {
            for column in 0..=row {
                let (above, here) = self.lower.split_at(row * n);
                let other = if column == row { &here[..column] } else { &above[column * n..][..column] };
                let taken: f64 = here[..column].iter().zip(other).map(|(a, b)| a * b).sum();
                let value = here[column] - taken;
                let entry = if column == row { value.sqrt() } else { value / above[column * n + column] };
                if !entry.is_finite() || (column == row && entry <= 0.0) {
                    return false;
                }
                self.lower[row * n + column] = entry;
            }
        }
        true
    }

    /// Replaces the right-hand side by the solution.
    pub fn solve(&self, x: &mut [f64]) {
        let n = self.size;
        for row in 0..n {
            let taken: f64 = self.lower[row * n..][..row].iter().zip(&*x).map(|(a, b)| a * b).sum();
            x[row] = (x[row] - taken) / self.lower[row * n + row];
        }
        for row in (0..n).rev() {
            x[row] /= self.lower[row * n + row];
            let value = x[row];
            for (out, entry) in x[..row].iter_mut().zip(&self.lower[row * n..]) {
                *out -= value * entry;
            }
        }
    }

    /// Diagonal entry `index` of the inverse.
    pub fn inverse_diagonal(&mut self, index: usize) -> f64 {
        let mut work = std::mem::take(&mut self.work);
        work.fill(0.0);
        work[index] = 1.0;
        self.solve(&mut work);
        let value = work[index];
        self.work = work;
        value
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn solves_and_inverts_a_small_system() {
        let matrix = [[4.0, 1.0, 0.5], [1.0, 3.0, -0.7], [0.5, -0.7, 2.0]];
        let mut cholesky = Cholesky::new(3);
        for (row, entries) in matrix.iter().enumerate() {
            for (column, entry) in entries[..=row].iter().enumerate() {
                cholesky.set(row, column, *entry);
            }
        }
        assert!(cholesky.factor());
        let mut x = [1.0, -2.0, 0.3];
        cholesky.solve(&mut x);
        for (row, right) in matrix.iter().zip([1.0, -2.0, 0.3]) {
            let product: f64 = row.iter().zip(&x).map(|(a, b)| a * b).sum();
            assert!((product - right).abs() < 16.0 * f64::EPSILON);
        }
        let mut unit = [0.0, 1.0, 0.0];
        cholesky.solve(&mut unit);
        assert!((cholesky.inverse_diagonal(1) - unit[1]).abs() < f64::EPSILON);
    }

    #[test]
    fn an_indefinite_system_is_refused() {
        let mut cholesky = Cholesky::new(2);
        cholesky.set(0, 0, 1.0);
        cholesky.set(1, 0, 2.0);
        cholesky.set(1, 1, 1.0);
        assert!(!cholesky.factor());
    }
}
