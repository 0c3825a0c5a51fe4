//! Control limits: the value that a healthy statistic passes with a given probability.
//!
//! The limit in use by default takes the statistic for `g chi2_h` and reads `g` and `h` from its running mean `m` and
//! variance `v`: `g = v / 2m`, `h = 2 m^2 / v` (Box, Ann. Math. Stat. 25 (1954) 290-302; Nomikos and MacGregor,
//! Technometrics 37 (1995) 41-59). Two things are done to make it hold:
//!
//! * What enters the moments is winsorised at the limit, or one burst would carry the limit away. That takes a known
//!   part from a chi-square's mean and variance, which is put back ([`quantile::ChiSquare::mean_left`]); without it
//!   each limit would feed a smaller one.
//! * Moments of few rows are uncertain and their limit would be passed too often. The distance from mean to limit is
//!   widened as for the prediction of one more value from `n`: by `t_nu sqrt(1 + 1/n) / z` ([`Widening`]), with `n`
//!   the number of independent rows and `nu = 2n / (2 + kurtosis)` the degrees of freedom of the variance.

pub mod histogram;
pub mod hotelling;
pub mod moments;
pub mod quantile;
pub mod spectrum;

use moments::Moments;
use quantile::ChiSquare;

/// Relative change of the degrees of freedom below which the widening is left as it is: it moves the factor by less
/// than a thousandth from 10 degrees of freedom on.
const WIDENING_STEP: f64 = 0.01;
/// Fewest degrees of freedom a variance is taken to have.
const FEWEST: f64 = 2.0;

/// Where the limits of SPE and T2 come from.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Limits {
    /// Moment-matched chi-square.
    #[default]
    Moments,
    /// Streamed quantile; the chi-square's shape beyond what the rows so far can tell.
    Empirical,
    /// The model's energies: Jackson and Mudholkar for the SPE, F for T2.
    Spectrum,
}

/// Factor by which a limit is widened for resting on few rows.
#[derive(Clone, Copy, Debug)]
pub struct Widening {
    tail: f64,
    normal: f64,
    nu: f64,
    factor: f64,
}

impl Widening {
    /// For a limit with probability `tail` beyond it.
    #[must_use]
    pub fn new(tail: f64) -> Self {
        Self { tail, normal: quantile::normal(tail), nu: 0.0, factor: 1.0 }
    }

    /// The factor for `n` independent rows of a statistic with excess `kurtosis`.
    pub fn follow(&mut self, n: f64, kurtosis: f64) -> f64 {
        let n = n.max(FEWEST);
        let nu = (2.0 * n / (2.0 + kurtosis.max(0.0))).max(FEWEST);
        if (nu - self.nu).abs() > WIDENING_STEP * self.nu {
            self.nu = nu;
            let one_more = (1.0 + 1.0 / n).sqrt();
            self.factor = (quantile::student(nu, self.tail) * one_more / self.normal).max(1.0);
        }
        self.factor
    }

    /// The factor last found, 1 or more.
    #[must_use]
    pub fn factor(&self) -> f64 {
        self.factor
    }

    /// Normal quantile of the tail.
    #[must_use]
    pub fn normal(&self) -> f64 {
        self.normal
    }
}

/// A limit that follows the moments of its statistic.
#[derive(Clone, Debug)]
pub struct MomentLimit {
    shape: ChiSquare,
    widening: Widening,
    value: f64,
}

impl MomentLimit {
    /// For a probability `tail` beyond; no limit yet.
    #[must_use]
    pub fn new(tail: f64) -> Self {
        Self { shape: ChiSquare::at(1.0, tail), widening: Widening::new(tail), value: f64::INFINITY }
    }

    /// Moves to the present moments; returns the limit. About 0.3 us where they have moved little.
    pub fn follow(&mut self, moments: &Moments) -> f64 {
        self.set(moments.mean(), moments.variance(), moments.independent())
    }

    /// The limit for winsorised mean, variance and number of independent rows.
    pub fn set(&mut self, winsorised_mean: f64, winsorised_variance: f64, n: f64) -> f64 {
        // What winsorising took, by the shape of the last answer: the fixed point is approached as the watch runs,
        // and the change is small from one call to the next.
        let mean = winsorised_mean / self.shape.mean_left;
        let variance = winsorised_variance / self.shape.variance_left;
        if !(mean > 0.0 && variance > 0.0 && mean.is_finite() && variance.is_finite()) {
            self.value = winsorised_mean.max(0.0);
            return self.value;
        }
        let h = 2.0 * mean * mean / variance;
        self.shape = self.shape.refined(h);
        // Excess kurtosis of chi-square: 12 / h.
        let widening = self.widening.follow(n, 12.0 / self.shape.h);
        self.value = mean * (1.0 + (self.shape.value / self.shape.h - 1.0).max(0.0) * widening);
        self.value
    }

    /// The limit last found.
    #[must_use]
    pub fn value(&self) -> f64 {
        self.value
    }

    /// How much wider it is for resting on few rows: 1 or more.
    #[must_use]
    pub fn widening(&self) -> f64 {
        self.widening.factor()
    }

    /// The chi-square it rests on.
    #[must_use]
    pub fn shape(&self) -> &ChiSquare {
        &self.shape
    }

    /// Factor on the limit where only the `share` of the degrees of freedom is observed, the statistic being scaled
    /// up by `1 / share`: fewer degrees of freedom spread wider. By Wilson and Hilferty's approximation.
    #[must_use]
    pub fn partial(&self, share: f64) -> f64 {
        let z = self.widening.normal();
        let whole = quantile::wilson_hilferty(self.shape.h, z);
        let part = quantile::wilson_hilferty(self.shape.h * share, z);
        if whole > 0.0 && part.is_finite() { (part / whole).max(1.0) } else { 1.0 }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn moments_of_a_whole_chi_square_give_its_quantile() {
        let mut limit = MomentLimit::new(1e-3);
        let exact = ChiSquare::at(9.0, 1e-3);
        for _ in 0..50 {
            limit.set(2.0 * 9.0 * exact.mean_left, 4.0 * 18.0 * exact.variance_left, 1e9);
        }
        assert!((limit.value() / (2.0 * exact.value) - 1.0).abs() < 1e-9, "{}", limit.value());
    }

    #[test]
    fn few_rows_widen_the_limit_and_many_do_not() {
        let mut last = f64::INFINITY;
        for n in [5.0, 20.0, 60.0, 500.0, 1e5] {
            let mut limit = MomentLimit::new(1e-3);
            for _ in 0..20 {
                limit.set(10.0, 20.0, n);
            }
            assert!(limit.value() < last && limit.widening() >= 1.0);
            last = limit.value();
        }
        assert!((last / quantile::chi_square(10.0, 1e-3) - 1.0).abs() < 0.02);
    }

    #[test]
    fn a_statistic_that_never_moves_is_its_own_limit() {
        let mut limit = MomentLimit::new(1e-3);
        assert!((limit.set(3.0, 0.0, 100.0) - 3.0).abs() < 1e-15);
        assert!(limit.set(0.0, 0.0, 100.0).abs() < 1e-15);
    }

    #[test]
    fn limits_shrink_back_after_a_wider_time() {
        let mut limit = MomentLimit::new(1e-2);
        for (mean, variance) in [(10.0, 20.0), (1e6, 1e13), (10.0, 20.0)] {
            for _ in 0..100 {
                limit.set(mean, variance, 1e4);
            }
        }
        let mut fresh = MomentLimit::new(1e-2);
        for _ in 0..100 {
            fresh.set(10.0, 20.0, 1e4);
        }
        // The widening, 1.0006 here, may stand at degrees of freedom a hundredth off.
        assert!((limit.value() / fresh.value() - 1.0).abs() < 1e-5);
    }
}
