//! Rows with gaps.
//!
//! With `A` the reported axes, `P = A^T A` projects on them. The values `x` in the gaps that the axes themselves would give,
//! once their coefficients are fitted to the observed channels by least squares, solve `(I - P_gg) x = P_go d_o`: a
//! system as large as there are gaps. Where there are more gaps than axes, the coefficients themselves are the smaller
//! system, `(I - A_g A_g^T) c = A_o d_o`.

use super::Tracker;
use crate::error::Error;
use crate::ops;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// A pivot of the system below this means that the observed channels hardly tell the axes apart: the least squares
/// would enlarge the noise of the observed channels by its reciprocal.
const LEAST_PIVOT: f64 = 1e-4;

/// A row split against the reported axes.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Split {
    /// Square of the residual over the observed channels, times channels / observed.
    pub residual_norm_squared: f64,
    /// Channels the row lacks.
    pub missing: usize,
    /// Whether the observed channels tell the axes apart.
    pub determined: bool,
}

/// Room for rows with gaps.
#[derive(Clone, Debug)]
pub(super) struct Gaps {
    places: Vec<usize>,
    matrix: Vec<f64>,
    right: Vec<f64>,
    coefficients: Vec<f64>,
}

impl Gaps {
    pub fn with_room(channels: usize, rank: usize) -> Self {
        Self {
            places: Vec::with_capacity(channels),
            matrix: Vec::with_capacity(rank * rank),
            right: Vec::with_capacity(rank),
            coefficients: vec![0.0; rank],
        }
    }

    /// Replaces NaN in `d`, a row less the mean, by what the axes give from the rest. False where they cannot be told
    /// from it; `d` then has zeros there. `O(gaps (gaps + rank)^2)` and one sweep.
    pub fn fill<T: Scalar>(&mut self, d: &mut [f64], axes: Rows<'_, T>) -> bool {
        self.places.clear();
        for (index, value) in d.iter_mut().enumerate() {
            if value.is_nan() {
                self.places.push(index);
                *value = 0.0;
            }
        }
        // b = A_o d_o, the gaps being zero.
        ops::project(axes, d, &mut self.coefficients);
        let order = self.places.len().min(axes.count());
        self.matrix.resize(order * order, 0.0);
        self.right.resize(order, 0.0);
        if order < axes.count() { self.fill_gaps(d, axes) } else { self.fill_coefficients(d, axes) }
    }

    /// The system in the values of the gaps.
    fn fill_gaps<T: Scalar>(&mut self, d: &mut [f64], axes: Rows<'_, T>) -> bool {
        let order = self.places.len();
        for (i, &row) in self.places.iter().enumerate() {
            for (j, &column) in self.places.iter().enumerate().take(i + 1) {
                let p: f64 = axes.iter().map(|axis| axis[row].to_f64() * axis[column].to_f64()).sum();
                self.matrix[i * order + j] = f64::from(u8::from(i == j)) - p;
            }
            self.right[i] = axes.iter().zip(&self.coefficients).map(|(axis, c)| axis[row].to_f64() * c).sum();
        }
        let determined = solve(&mut self.matrix, order, &mut self.right);
        if determined {
            self.places.iter().zip(&self.right).for_each(|(&place, &value)| d[place] = value);
        }
        determined
    }

    /// The system in the coefficients.
    fn fill_coefficients<T: Scalar>(&mut self, d: &mut [f64], axes: Rows<'_, T>) -> bool {
        let order = axes.count();
        for i in 0..order {
            for j in 0..=i {
                let (a, b) = (axes.row(i), axes.row(j));
                let p: f64 = self.places.iter().map(|&gap| a[gap].to_f64() * b[gap].to_f64()).sum();
                self.matrix[i * order + j] = f64::from(u8::from(i == j)) - p;
            }
        }
        self.right.copy_from_slice(&self.coefficients);
        let determined = solve(&mut self.matrix, order, &mut self.right);
        if determined {
            for &place in &self.places {
                d[place] = axes.iter().zip(&self.right).map(|(axis, c)| axis[place].to_f64() * c).sum();
            }
        }
        determined
    }
}

/// Solves the symmetric positive definite system whose lower triangle is given, in place, by Cholesky. False where a pivot
/// is too small.
fn solve(matrix: &mut [f64], order: usize, x: &mut [f64]) -> bool {
    for i in 0..order {
        for j in 0..=i {
            let product: f64 = (0..j).map(|k| matrix[i * order + k] * matrix[j * order + k]).sum();
            let rest = matrix[i * order + j] - product;
            if i > j {
                matrix[i * order + j] = rest / matrix[j * order + j];
            } else if rest < LEAST_PIVOT {
                return false;
            } else {
                matrix[i * order + i] = rest.sqrt();
            }
        }
        let sum: f64 = (0..i).map(|k| matrix[i * order + k] * x[k]).sum();
        x[i] = (x[i] - sum) / matrix[i * order + i];
    }
    for i in (0..order).rev() {
        let sum: f64 = (i + 1..order).map(|k| matrix[k * order + i] * x[k]).sum();
        x[i] = (x[i] - sum) / matrix[i * order + i];
    }
    true
}

impl<T: Scalar> Tracker<T> {
    /// Splits a row against the mean and the reported axes as they stand, refreshed where stale, without learning. NaN is
    /// a gap: the coefficients are fitted to the observed channels, and the residual is zero in a gap.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`] for an infinity.
    pub fn split_into(
        &mut self,
        row: &[f64],
        coefficients: &mut [f64],
        residual: &mut [f64],
    ) -> Result<Split, Error> {
        let missing = self.check(row)?;
        self.refresh()?;
        let d = &mut self.room.d;
        for ((d, mean), value) in d.iter_mut().zip(&self.mean).zip(row) {
            *d = value - mean;
        }
        let axes = self.principal.axes();
        let determined = missing == 0 || self.gaps.fill(d, axes);
        ops::project(axes, d, coefficients);
        ops::subtract(axes, coefficients, d, residual);
        if missing > 0 {
            row.iter()
                .zip(residual.iter_mut())
                .filter(|(value, _)| value.is_nan())
                .for_each(|(_, out)| *out = 0.0);
        }
        let observed = (self.settings.channels - missing).max(1) as f64;
        let scale = self.settings.channels as f64 / observed;
        let residual_norm_squared = scale * ops::norm_squared(residual);
        Ok(Split { residual_norm_squared, missing, determined })
    }

    /// The model's own value of a row: the mean, and what the reported axes give of the rest; gaps are filled.
    ///
    /// # Errors
    /// As [`Tracker::split_into`].
    pub fn reconstruct_into(&mut self, row: &[f64], value: &mut [f64]) -> Result<(), Error> {
        self.check(row)?;
        self.refresh()?;
        let d = &mut self.room.d;
        for ((d, mean), entry) in d.iter_mut().zip(&self.mean).zip(row) {
            *d = entry - mean;
        }
        let axes = self.principal.axes();
        self.gaps.fill(d, axes);
        let coefficients = &mut self.gaps.coefficients;
        ops::project(axes, d, coefficients);
        for c in &mut *coefficients {
            *c = -*c;
        }
        ops::subtract(axes, coefficients, &self.mean, value);
        Ok(())
    }
}
