//! Missing channels: what the model says they would have been.
//!
//! The sums over the observed channels are those over all, which are known, less those over the gaps, or are
//! taken directly, whichever is shorter: the work grows with the number of gaps, not with the channels.

use super::normal::{decompose, substitute};
use super::subspace::Subspace;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Share of a coefficient's direction that the observed channels must hold for the coefficient to be determined:
/// below it more than half of the digits are gone.
const DETERMINED: f64 = 1e-8;
/// Ridge relative to each diagonal entry: the square root of eps, halfway between what rounding makes of a direction
/// that is not observed and what the ridge takes from one that is. A second pass takes the latter back.
const RIDGE: f64 = 1.5e-8;

/// Workspace for rows with gaps.
#[derive(Clone, Debug)]
pub(super) struct Gaps {
    channels: usize,
    /// Missing channels of the last row, ascending.
    missing: Vec<usize>,
    square: Vec<f64>,
    column: Vec<f64>,
    image: Vec<f64>,
    total: Vec<f64>,
    fitted: Vec<f64>,
}

impl Gaps {
    /// Workspace for at most `limit` directions.
    pub(super) fn new(channels: usize, limit: usize) -> Self {
        Self {
            channels,
            missing: Vec::with_capacity(channels),
            square: vec![0.0; limit * limit],
            column: vec![0.0; limit],
            image: vec![0.0; limit],
            total: vec![0.0; limit],
            fitted: vec![0.0; limit],
        }
    }

    pub(super) fn missing(&self) -> &[usize] {
        &self.missing
    }

    /// No gaps.
    pub(super) fn clear(&mut self) {
        self.missing.clear();
    }

    /// Notes the gaps of `row`; its index where an entry is infinite.
    pub(super) fn find(&mut self, row: &[f64]) -> Result<(), usize> {
        self.missing.clear();
        for (channel, value) in row.iter().enumerate() {
            if value.is_nan() {
                self.missing.push(channel);
            } else if value.is_infinite() {
                return Err(channel);
            }
        }
        Ok(())
    }

    /// Turns the coefficients `c = A d`, taken with zeros in the gaps, into those of the least-squares fit to the
    /// observed channels. Coefficients that these do not determine are 0; false where there are such.
    pub(super) fn fit<T: Scalar>(&mut self, axes: Rows<'_, T>, c: &mut [f64]) -> bool {
        let rank = axes.count();
        let gaps = self.missing.len();
        if gaps == self.channels {
            c.fill(0.0);
            return rank == 0;
        }
        if gaps < rank {
            // (I - A_m^T A_m) y = A_m^T c for the gaps themselves, then c += A_m y.
            let (square, y) = (&mut self.square[..gaps * gaps], &mut self.image[..gaps]);
            square.fill(0.0);
            y.fill(0.0);
            for (axis, &coefficient) in axes.iter().zip(&*c) {
                for (index, &channel) in self.missing.iter().enumerate() {
                    let entry = axis[channel].to_f64();
                    y[index] += entry * coefficient;
                    for (out, &other) in square[index * gaps..].iter_mut().zip(&self.missing[..=index]) {
                        *out -= entry * axis[other].to_f64();
                    }
                }
            }
            square.iter_mut().step_by(gaps + 1).for_each(|entry| *entry += 1.0);
            let determined = decompose(square, gaps, DETERMINED);
            substitute(square, y);
            for (axis, out) in axes.iter().zip(c) {
                *out += self.missing.iter().zip(&*y).map(|(&m, y)| axis[m].to_f64() * y).sum::<f64>();
            }
            return determined;
        }
        // A_o A_o^T c = A d.
        let Self { missing, square, column, .. } = self;
        let (square, column) = (&mut square[..rank * rank], &mut column[..rank]);
        square.fill(0.0);
        let direct = gather(missing, self.channels, |channel, sign| {
            for (out, axis) in column.iter_mut().zip(axes.iter()) {
                *out = axis[channel].to_f64();
            }
            add_outer(square, column, sign);
        });
        if !direct {
            square.iter_mut().step_by(rank + 1).for_each(|entry| *entry += 1.0);
        }
        let determined = decompose(square, rank, DETERMINED);
        substitute(square, c);
        determined
    }

    /// Fills the gaps of `delta`, which holds zeros there, with the model's values, given `h = Q delta`.
    ///
    /// The fit uses all tracked directions and is held to their energies: of two ways to explain the observed
    /// channels the likelier is taken, so weak guard directions, which few channels cannot tell apart, stay small.
    /// (The conditional mean under the tracked covariance with `noise` a channel, times the total weight, beside it.)
    pub(super) fn fill<T: Scalar>(
        &mut self,
        model: &Subspace<T>,
        noise: f64,
        h: &mut [f64],
        delta: &mut [f64],
    ) {
        let (q, factor) = (model.basis(), model.factor());
        let size = q.count();
        let Self { missing, square, column, image, .. } = self;
        let (square, column, image) = (&mut square[..size * size], &mut column[..size], &mut image[..size]);
        square.fill(0.0);
        // R G R^T over the observed channels, in coordinates in which every direction has energy 1.
        let direct = gather(missing, self.channels, |channel, sign| {
            for (out, row) in column.iter_mut().zip(q.iter()) {
                *out = row[channel].to_f64();
            }
            factor.apply(column, image);
            add_outer(square, image, sign);
        });
        if !direct {
            for row in 0..size {
                for other in 0..=row {
                    let (long, short) = (factor.tail(other), factor.tail(row));
                    let sum: f64 = long[row - other..].iter().zip(short).map(|(a, b)| a * b).sum();
                    square[row * size + other] += sum;
                }
            }
        }
        for (row, entry) in square.iter_mut().step_by(size + 1).enumerate() {
            let scale: f64 = factor.tail(row).iter().map(|entry| entry * entry).sum();
            *entry += RIDGE * scale + noise;
        }
        decompose(square, size, 0.0);
        // t = 0, then twice t += A^-1 (R (h - G R^T t) - noise t), the observed part of the basis being G.
        let Self { missing, column, image, total, fitted, .. } = self;
        let (total, fitted) = (&mut total[..size], &mut fitted[..size]);
        total.fill(0.0);
        fitted.fill(0.0);
        for _ in 0..2 {
            let column = &mut column[..size];
            column.copy_from_slice(fitted);
            for &channel in &*missing {
                let product: f64 = q.iter().zip(&*fitted).map(|(row, h)| row[channel].to_f64() * h).sum();
                for (out, row) in column.iter_mut().zip(q.iter()) {
                    *out -= product * row[channel].to_f64();
                }
            }
            for (out, target) in column.iter_mut().zip(&*h) {
                *out = target - *out;
            }
            let image = &mut image[..size];
            factor.apply(column, image);
            for (out, t) in image.iter_mut().zip(&*total) {
                *out -= noise * t;
            }
            substitute(square, image);
            for (sum, more) in total.iter_mut().zip(&*image) {
                *sum += more;
            }
            factor.apply_transposed(total, fitted);
        }
        h.copy_from_slice(fitted);
        for &channel in &*missing {
            delta[channel] = q.iter().zip(&*h).map(|(row, h)| row[channel].to_f64() * h).sum();
        }
    }
}

/// Visits the gaps with sign -1, or the observed channels with sign 1, whichever are fewer; true for the latter.
fn gather(missing: &[usize], channels: usize, mut visit: impl FnMut(usize, f64)) -> bool {
    let direct = missing.len() * 2 > channels;
    if direct {
        let mut gaps = missing.iter().copied().peekable();
        for channel in 0..channels {
            if gaps.next_if_eq(&channel).is_none() {
                visit(channel, 1.0);
            }
        }
    } else {
        for &channel in missing {
            visit(channel, -1.0);
        }
    }
    direct
}

/// Adds `sign x x^T` to the lower triangle.
fn add_outer(square: &mut [f64], x: &[f64], sign: f64) {
    for (row, &factor) in x.iter().enumerate() {
        for (out, entry) in square[row * x.len()..].iter_mut().zip(&x[..=row]) {
            *out += sign * factor * entry;
        }
    }
}
