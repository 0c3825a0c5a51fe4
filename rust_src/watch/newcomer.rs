//! A channel that stayed out, watched for its first movement.
//!
//! It joins when it has moved and has shown enough values since: with the mean and spread of those, and with what they say
//! of how it moves with the others. Its covariances with their deviations give the loadings `b = sum_k p_k (p_k . c) / L_k` on
//! the axes `p` of energies `L`: by them its past is filled in, else axes that know nothing of it would leave all its
//! movement in the residual for as long as the past is remembered.

use super::units::{ROUNDINGS, moves};
use crate::error::Error;
use crate::rows::Rows;
use crate::scalar::Scalar;
use crate::state::{Part, Reader, Writer};

/// What is known of a channel that takes no part.
#[derive(Clone, Debug, Default)]
pub struct Newcomer {
    count: u64,
    mean: f64,
    square: f64,
    first: f64,
    stirred: bool,
    /// Sums of products of its deviations and the others', and the others' mean deviations. No room is taken before it
    /// has moved.
    products: Vec<f64>,
    others: Vec<f64>,
}

/// What a channel joins with.
#[derive(Clone, Debug)]
pub struct Joining {
    /// Its mean.
    pub mean: f64,
    /// Its standard deviation.
    pub spread: f64,
    /// Weights on the other channels' deviations that give its own, in spreads.
    pub loadings: Vec<f64>,
    /// The share of its variance that they do not give.
    pub own: f64,
}

impl Newcomer {
    /// Takes in a value and the deviations of the row it came with, gaps among them as NaN. Returns whether `enough` values
    /// are known. `4 channels` flops once it has moved.
    pub fn take(&mut self, value: f64, deviations: &[f64], enough: u64) -> bool {
        if value.is_nan() {
            return false;
        }
        if !self.stirred {
            if self.count == 0 {
                self.first = value;
                self.count = 1;
                return false;
            }
            if !moves(self.first.min(value), self.first.max(value), self.first.abs().max(value.abs())) {
                return false;
            }
            let zeros = vec![0.0; deviations.len()];
            *self = Self { stirred: true, products: zeros.clone(), others: zeros, ..Self::default() };
        }
        self.count = self.count.saturating_add(1);
        let share = (self.count as f64).recip();
        let step = value - self.mean;
        self.mean += step * share;
        let left = value - self.mean;
        self.square += step * left;
        for ((product, other), deviation) in self.products.iter_mut().zip(&mut self.others).zip(deviations) {
            let away = if deviation.is_nan() { 0.0 } else { deviation - *other };
            *product += left * away;
            *other += away * share;
        }
        let spread = self.spread();
        if !self.square.is_finite() {
            // Beyond all numbers that a channel can be judged by: from the beginning.
            *self = Self::default();
            return false;
        }
        let known = self.count >= enough && spread >= f64::MIN_POSITIVE && spread.is_finite();
        known && spread > ROUNDINGS * f64::EPSILON * self.mean.abs()
    }

    /// What it joins with, seen on `axes` with `energies`.
    #[must_use]
    pub fn join<T: Scalar>(&self, axes: Rows<'_, T>, energies: &[f64]) -> Joining {
        let spread = self.spread();
        let unit = (self.count as f64 * spread).recip();
        let mut loadings = vec![0.0; self.products.len()];
        let mut explained = 0.0;
        for (axis, energy) in axes.iter().zip(energies) {
            let along: f64 = axis.iter().zip(&self.products).map(|(p, c)| p.to_f64() * (c * unit)).sum();
            let told = explained + along * along / energy;
            // More than all of its variance is none of its own: such axes are noise.
            if !(told.is_finite() && told <= 1.0) {
                continue;
            }
            explained = told;
            for (loading, entry) in loadings.iter_mut().zip(axis) {
                *loading += along / energy * entry.to_f64();
            }
        }
        Joining { mean: self.mean, spread, loadings, own: 1.0 - explained }
    }

    fn spread(&self) -> f64 {
        (self.square / self.count as f64).sqrt()
    }
}

/// A row of five numbers a channel; for those that have stirred two rows each, products and others, one after another.
impl Part for [Newcomer] {
    fn write(&self, to: &mut Writer) {
        let mut values = Vec::with_capacity(5 * self.len());
        let mut with_others = Vec::new();
        for newcomer in self {
            let Newcomer { count, mean, square, first, stirred, products, others } = newcomer;
            values.extend([*count as f64, *mean, *square, *first, f64::from(u8::from(*stirred))]);
            with_others.extend_from_slice(products);
            with_others.extend_from_slice(others);
        }
        to.table("values", 5, &values);
        to.table("with_others", self.len(), &with_others);
    }

    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "as saturates, NaN is 0")]
    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let channels = self.len();
        let values = from.table("values", 5, channels)?;
        let with_others = from.table("with_others", channels, 2 * channels)?;
        let mut pairs = with_others.chunks_exact(2 * channels);
        let mut rows = values.chunks_exact(5);
        for newcomer in self {
            let Some(&[count, mean, square, first, stirred]) = rows.next() else {
                return Err(from.unlike("values", "a row a channel", "fewer"));
            };
            *newcomer = Newcomer { count: count as u64, mean, square, first, ..Newcomer::default() };
            if stirred > 0.0 {
                let Some(pair) = pairs.next() else {
                    return Err(from.unlike("with_others", "two rows for each that stirred", "fewer"));
                };
                let (products, others) = pair.split_at(channels);
                (newcomer.stirred, newcomer.products, newcomer.others) =
                    (true, products.to_vec(), others.to_vec());
            }
        }
        if values.iter().chain(&with_others).any(|value| value.is_nan()) || pairs.next().is_some() {
            return Err(from.unlike("values", "numbers, and no rows of others that did not stir", "others"));
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::rows::RowStore;

    #[test]
    fn it_joins_after_it_has_moved_and_been_seen() {
        let mut newcomer = Newcomer::default();
        assert!((0..1000).all(|_| !newcomer.take(5.0, &[0.1, 0.0], 10)));
        let known = (0..12).filter(|i| newcomer.take(5.0 + f64::from(i % 3), &[0.1, 0.0], 10)).count();
        // The first value of the twelve is the old one.
        assert_eq!(known, 2);
        let joining = newcomer.join(RowStore::<f64>::zeros(0, 2).view(0), &[]);
        assert!((joining.mean - 6.0).abs() < 0.2 && (joining.spread - 0.8).abs() < 0.1);
        assert!((joining.own - 1.0).abs() < f64::EPSILON);
    }

    #[test]
    fn its_loadings_are_those_it_was_made_with() {
        let mut axes = RowStore::<f64>::zeros(2, 3);
        axes.row_mut(0).copy_from_slice(&[0.8, 0.6, 0.0]);
        axes.row_mut(1).copy_from_slice(&[-0.6, 0.8, 0.0]);
        let mut newcomer = Newcomer::default();
        newcomer.take(-3.0, &[0.0; 3], 10);
        // Two movements, 90 degrees apart, of energies 2 and 0.5.
        for i in 0..400 {
            let angle = f64::from(i) * std::f64::consts::TAU / 40.0;
            let scores = [2.0 * angle.cos(), angle.sin()];
            let row = [0.8 * scores[0] - 0.6 * scores[1], 0.6 * scores[0] + 0.8 * scores[1], 0.0];
            newcomer.take(7.0 + 3.0 * scores[0] - 2.0 * scores[1], &row, 10);
        }
        let joining = newcomer.join(axes.view(2), &[2.0, 0.5]);
        let spread = (9.0 * 2.0 + 4.0 * 0.5_f64).sqrt();
        let expected = [(3.0 * 0.8 + 2.0 * 0.6) / spread, (3.0 * 0.6 - 2.0 * 0.8) / spread, 0.0];
        assert!((joining.spread / spread - 1.0).abs() < 1e-12 && joining.own.abs() < 1e-12);
        for (loading, expected) in joining.loadings.iter().zip(expected) {
            assert!((loading - expected).abs() < 1e-12, "{:?}", joining.loadings);
        }
    }
}
