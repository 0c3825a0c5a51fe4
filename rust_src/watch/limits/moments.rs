//! Running mean, variance, skewness and lag-one correlation of a statistic, with forgetting.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Lag-one correlation above which a series says no more of its own spread than this.
const STIFFEST: f64 = 0.999;

/// A value beyond this counts as this: the cubes of what is counted have to stay numbers, or the moments would stay none.
const FARTHEST: f64 = 1e100;

/// Weighted moments of a series; each new value weighs 1, older ones less.
#[derive(Clone, Debug, Default)]
pub struct Moments {
    weight: f64,
    /// Sum of the squared weights: with `weight` it says how many equal rows these are worth (Kish 1965).
    square: f64,
    mean: f64,
    variance: f64,
    /// Third central moment.
    third: f64,
    covariance: f64,
    last: f64,
}

impl Moments {
    /// Takes in `value`; what came before keeps the share `keep` of its weight.
    pub fn learn(&mut self, value: f64, keep: f64) {
        let value = value.clamp(-FARTHEST, FARTHEST);
        let first = self.weight == 0.0;
        self.weight = keep * self.weight + 1.0;
        self.square = keep * keep * self.square + 1.0;
        let share = self.weight.recip();
        let step = value - self.mean;
        // The new value lies (1 - share) step from the new mean, the old ones share step further from it than before.
        let (far, near) = ((1.0 - share) * step, share * step);
        self.third =
            (1.0 - share) * (self.third - 3.0 * near * self.variance - near.powi(3)) + share * far.powi(3);
        if !self.third.is_finite() {
            // Values beyond 1e100: no limit asks for the skewness of such.
            self.third = 0.0;
        }
        self.mean += near;
        self.variance = (1.0 - share) * (self.variance + near * step);
        if !first {
            let product = (value - self.mean) * (self.last - self.mean);
            self.covariance += (product - self.covariance) / self.weight;
        }
        self.last = value;
    }

    /// As if all values had been `factor` times what they were.
    pub fn scale(&mut self, factor: f64) {
        let within = |moment: f64, power| moment.clamp(-FARTHEST.powi(power), FARTHEST.powi(power));
        self.mean = within(self.mean * factor, 1);
        self.variance = within(self.variance * factor * factor, 2);
        self.third = within(self.third * factor.powi(3), 3);
        self.covariance = within(self.covariance * factor * factor, 2);
        self.last = within(self.last * factor, 1);
    }

    /// Adds to mean and variance what a newly joined part of the statistic is expected to bring.
    pub fn shift(&mut self, mean: f64, variance: f64) {
        self.mean += mean;
        self.variance += variance;
        self.last += mean;
    }

    /// Mean; 0 of nothing.
    #[must_use]
    pub fn mean(&self) -> f64 {
        self.mean
    }

    /// Variance about the mean; 0 of nothing.
    #[must_use]
    pub fn variance(&self) -> f64 {
        self.variance
    }

    /// Third central moment over the cube of the spread; 0 where nothing moves.
    #[must_use]
    pub fn skewness(&self) -> f64 {
        let scale = self.variance * self.variance.sqrt();
        if scale > 0.0 && self.third.is_finite() { self.third / scale } else { 0.0 }
    }

    /// Correlation of a value with the one before, kept within 0 and 0.999.
    #[must_use]
    pub fn correlation(&self) -> f64 {
        if self.variance > 0.0 { (self.covariance / self.variance).clamp(0.0, STIFFEST) } else { 0.0 }
    }

    /// How many values of equal weight these are worth.
    #[must_use]
    pub fn count(&self) -> f64 {
        if self.square > 0.0 { self.weight * self.weight / self.square } else { 0.0 }
    }

    /// How many independent values they are worth: `n (1 - r) / (1 + r)` for a first-order correlation `r`
    /// (Bartlett, J. R. Stat. Soc. 98 (1935) 536-543).
    #[must_use]
    pub fn independent(&self) -> f64 {
        let r = self.correlation();
        self.count() * (1.0 - r) / (1.0 + r)
    }
}

/// Seven numbers: weight, its square sum, mean, variance, third moment, covariance, last value.
impl Part for Moments {
    fn write(&self, to: &mut Writer) {
        let Self { weight, square, mean, variance, third, covariance, last } = *self;
        to.numbers("moments", &[weight, square, mean, variance, third, covariance, last]);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let numbers = from.numbers("moments", 7)?;
        let [weight, square, mean, variance, third, covariance, last] = numbers[..] else { return Ok(()) };
        if weight < 0.0 || square < 0.0 || variance < 0.0 {
            return Err(from.unlike("moments", "weights and a variance of 0 or more", "others"));
        }
        *self = Self { weight, square, mean, variance, third, covariance, last };
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn with_nothing_forgotten_they_are_the_plain_moments() {
        let series = [3.0, 1.0, 4.0, 1.5, 5.0, 9.0, 2.5, 6.0];
        let mut moments = Moments::default();
        for value in series {
            moments.learn(value, 1.0);
        }
        let n = series.len() as f64;
        let mean = series.iter().sum::<f64>() / n;
        let variance = series.iter().map(|x| (x - mean) * (x - mean)).sum::<f64>() / n;
        assert!((moments.mean() - mean).abs() < 4.0 * f64::EPSILON * mean);
        assert!((moments.variance() - variance).abs() < 16.0 * f64::EPSILON * variance);
        let third = series.iter().map(|x| (x - mean).powi(3)).sum::<f64>() / n;
        assert!((moments.skewness() - third / variance.powf(1.5)).abs() < 32.0 * f64::EPSILON);
        assert!((moments.count() - n).abs() < 1e-12);
    }

    #[test]
    fn values_beyond_all_measure_leave_numbers_that_come_back() {
        let mut moments = Moments::default();
        for value in [1.0, f64::INFINITY, 1e308, 0.5, f64::MAX] {
            moments.learn(value, 0.9);
            assert!(
                moments.third.is_finite() && moments.variance.is_finite() && moments.covariance.is_finite()
            );
        }
        let mut scaled = moments.clone();
        scaled.scale(1e102);
        assert!(scaled.third.is_finite() && scaled.variance.is_finite() && scaled.covariance.is_finite());
        for i in 0..10_000 {
            moments.learn(f64::from(i % 7), 0.9);
        }
        assert!((moments.mean() - 3.0).abs() < 2.0, "{moments:?}");
    }

    #[test]
    fn forgetting_limits_what_they_are_worth() {
        let mut moments = Moments::default();
        for i in 0..10_000 {
            moments.learn(f64::from(i % 7), 0.99);
        }
        // Weights 0.99^i: (1/(1-a))^2 (1 - a^2) = (1 + a)/(1 - a).
        assert!((moments.count() - 199.0).abs() < 1e-6);
    }

    #[test]
    fn a_stiff_series_is_worth_few_independent_values() {
        let mut moments = Moments::default();
        let mut state = 12_345_u64;
        let mut x = 0.0;
        for _ in 0..200_000 {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            let uniform = (state >> 11) as f64 / 9_007_199_254_740_992.0 - 0.5;
            x = 0.8 * x + uniform;
            moments.learn(x, 1.0);
        }
        assert!((moments.correlation() - 0.8).abs() < 0.01);
        assert!((moments.independent() / 200_000.0 - 0.2 / 1.8).abs() < 0.01);
    }
}
