//! Control limits: the value that a healthy statistic passes with a given probability.
//!
//! The limit in use by default takes the statistic for `a + g chi2_h` and reads `a`, `g` and `h` from its running moments.
//! With mean `m` and variance `v` alone, `a = 0`, `g = v / 2m`, `h = 2 m^2 / v` (Box, Ann. Math. Stat. 25 (1954) 290-302;
//! Nomikos and MacGregor, Technometrics 37 (1995) 41-59). Where residual directions carry unequal energies that is passed too
//! often far out: at one row in 4000, by factors of two to four. The skewness tells how unequal they are:
//! `h = 8 / skewness^2` (Pearson, Biometrika 46 (1959) 364; Imhof, Biometrika 48 (1961) 419-426). A sum of weighted
//! chi-squares is never less skewed than the two-moment match, so that one is the least.
//!
//! Two more things are done to make the limit hold:
//!
//! * What enters the moments is winsorised at the limit, or one burst would carry the limit away. That takes a known
//!   part from the moments of a chi-square, which is put back ([`quantile::ChiSquare::mean_left`]); without it each
//!   limit would feed a smaller one.
//! * Moments of few rows are uncertain and their limit would be passed too often. The distance from mean to limit is
//!   widened as for the prediction of one more value from `n`: by `t_nu sqrt(1 + 1/n) / z` ([`Widening`]), with `n`
//!   the number of independent rows and `nu = 2n / (2 + kurtosis)` the degrees of freedom of the variance. A skewness
//!   counts by the share `n / (n + 100)` in so far as it exceeds the least.

pub mod histogram;
pub mod hotelling;
pub mod moments;
pub mod quantile;
pub mod spectrum;

use moments::Moments;
use quantile::ChiSquare;

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Relative change of the degrees of freedom below which the widening is left as it is: it moves the factor by less
/// than a thousandth from 10 degrees of freedom on.
const WIDENING_STEP: f64 = 0.01;
/// Fewest degrees of freedom a variance is taken to have: below, the widening would say more of a level that has just
/// shifted, which looks like correlation, than of the rows.
const FEWEST: f64 = 5.0;

/// Independent rows at which a measured skewness counts by half: its standard error is then a quarter and more.
pub(super) const SKEWED: f64 = 100.0;

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

impl Limits {
    /// All of them.
    pub const ALL: [Self; 3] = [Self::Moments, Self::Empirical, Self::Spectrum];

    /// Its name.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Moments => "moments",
            Self::Empirical => "empirical",
            Self::Spectrum => "spectrum",
        }
    }

    /// The one of that name.
    #[must_use]
    pub fn named(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|limits| limits.name() == name)
    }
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
    /// Degrees of freedom of the two-moment match.
    plain: f64,
}

impl MomentLimit {
    /// For a probability `tail` beyond; no limit yet.
    #[must_use]
    pub fn new(tail: f64) -> Self {
        let shape = ChiSquare::at(1.0, tail);
        Self { shape, widening: Widening::new(tail), value: f64::INFINITY, plain: 1.0 }
    }

    /// Moves to the present moments; returns the limit. About 0.3 us where they have moved little.
    pub fn follow(&mut self, moments: &Moments) -> f64 {
        self.set(moments.mean(), moments.variance(), moments.skewness(), moments.independent())
    }

    /// The limit for mean, variance and skewness of the winsorised statistic, from `n` independent rows.
    pub fn set(&mut self, mean: f64, variance: f64, skewness: f64, n: f64) -> f64 {
        let winsorised_mean = mean;
        // What winsorising took, by the shape of the last answer: the fixed point is approached as the watch runs,
        // and the change is small from one call to the next.
        let variance = variance / self.shape.variance_left;
        let skewness = skewness * self.shape.variance_left.powf(1.5) / self.shape.third_left.max(0.1);
        let unit = (variance / (2.0 * self.shape.h)).sqrt();
        let mean = mean + unit * self.shape.h * (1.0 - self.shape.mean_left);
        if !(mean > 0.0 && variance > 0.0 && mean.is_finite() && variance.is_finite()) {
            self.value = winsorised_mean.max(0.0);
            return self.value;
        }
        self.plain = 2.0 * mean * mean / variance;
        let least = (8.0 / self.plain).sqrt();
        let skewness = least + (skewness - least).max(0.0) * n / (n + SKEWED);
        self.shape = self.shape.refined(8.0 / (skewness * skewness));
        let h = self.shape.h;
        // Excess kurtosis of chi-square: 12 / h.
        let widening = self.widening.follow(n, 12.0 / h);
        let far = (self.shape.value - h).max(0.0) / (2.0 * h).sqrt();
        self.value = mean + variance.sqrt() * far * widening;
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
        let whole = quantile::wilson_hilferty(self.plain, z);
        let part = quantile::wilson_hilferty(self.plain * share, z);
        if whole > 0.0 && part.is_finite() { (part / whole).max(1.0) } else { 1.0 }
    }
}

impl Part for Widening {
    fn write(&self, to: &mut Writer) {
        let Self { tail: _, normal: _, nu, factor } = self;
        to.number("nu", *nu);
        to.number("factor", *factor);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.nu = from.amount("nu")?;
        self.factor = from.amount("factor")?;
        if self.factor < 1.0 {
            return Err(from.unlike("factor", "1 or more", &self.factor.to_string()));
        }
        Ok(())
    }
}

impl Part for MomentLimit {
    fn write(&self, to: &mut Writer) {
        let Self { shape, widening, value, plain } = self;
        to.part("shape", shape);
        to.part("widening", widening);
        to.number("value", *value);
        to.number("plain", *plain);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        from.part("shape", &mut self.shape)?;
        from.part("widening", &mut self.widening)?;
        self.value = from.amount("value")?;
        self.plain = from.amount("plain")?;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Follows fixed moments until the limit stands.
    fn stand(limit: &mut MomentLimit, mean: f64, variance: f64, skewness: f64, n: f64) -> f64 {
        for _ in 0..100 {
            limit.set(mean, variance, skewness, n);
        }
        limit.value()
    }

    #[test]
    fn moments_of_a_winsorised_chi_square_give_its_quantile() {
        let exact = ChiSquare::at(9.0, 1e-3);
        let (mean, variance) = (2.0 * 9.0 * exact.mean_left, 4.0 * 18.0 * exact.variance_left);
        let third = 8.0 * 72.0 * exact.third_left;
        let got = stand(&mut MomentLimit::new(1e-3), mean, variance, third / variance.powf(1.5), 1e12);
        assert!((got / (2.0 * exact.value) - 1.0).abs() < 1e-6, "{got}");
    }

    /// Exact quantiles of `l1 chi2_1 + l2 chi2_1`, computed with 50 digits from
    /// `P(X <= x) = 1 - 2/pi int_0^{pi/2} exp(-x / 2(l1 cos^2 a + l2 sin^2 a)) da`, where Box's two moments are off
    /// by 3 to 6 % at this level.
    #[test]
    fn three_moments_come_within_two_per_cent_of_the_exact_quantile_of_unequal_energies() {
        for ([l1, l2], exact) in [
            ([4.0_f64, 1.0_f64], 44.479_086_303_493_936),
            ([10.0, 1.0], 109.334_692_647_978_46),
            ([29.33, 16.41], 343.360_190_705_059_15),
        ] {
            let theta = |power: i32| l1.powi(power) + l2.powi(power);
            let (mean, variance) = (theta(1), 2.0 * theta(2));
            let skewness = 8.0 * theta(3) / variance.powf(1.5);
            // The moments are those before winsorising: at this level it takes little of them.
            let mut limit = MomentLimit::new(1e-3);
            limit.shape = ChiSquare { mean_left: 1.0, variance_left: 1.0, third_left: 1.0, ..limit.shape };
            let got = limit.set(mean, variance, skewness, 1e12);
            assert!((got / exact - 1.0).abs() < 0.02, "{l1} {l2}: {got} against {exact}");
        }
    }

    #[test]
    fn few_rows_widen_the_limit_and_many_do_not() {
        let mut last = f64::INFINITY;
        for n in [5.0, 20.0, 60.0, 500.0, 1e5] {
            let mut limit = MomentLimit::new(1e-3);
            assert!(stand(&mut limit, 10.0, 20.0, 0.0, n) < last && limit.widening() >= 1.0);
            last = limit.value();
        }
        assert!((last / quantile::chi_square(10.0, 1e-3) - 1.0).abs() < 0.02);
    }

    #[test]
    fn a_statistic_that_never_moves_is_its_own_limit() {
        let mut limit = MomentLimit::new(1e-3);
        assert!((limit.set(3.0, 0.0, 0.0, 100.0) - 3.0).abs() < 1e-15);
        assert!(limit.set(0.0, 0.0, 0.0, 100.0).abs() < 1e-15);
    }

    #[test]
    fn limits_shrink_back_after_a_wider_time() {
        let mut limit = MomentLimit::new(1e-2);
        stand(&mut limit, 10.0, 20.0, 1.0, 1e4);
        stand(&mut limit, 1e6, 1e13, 9.0, 1e4);
        stand(&mut limit, 10.0, 20.0, 1.0, 1e4);
        let fresh = stand(&mut MomentLimit::new(1e-2), 10.0, 20.0, 1.0, 1e4);
        // The widening, 1.0006 here, may stand at degrees of freedom a hundredth off.
        assert!((limit.value() / fresh - 1.0).abs() < 1e-5);
    }
}
