//! Upper quantiles: the value that a variable passes with probability `tail`.
//!
//! The chi-square one is asked again and again while the watch runs, at degrees of freedom that creep: it is found
//! by Newton steps on the logarithm of the tail, from the last answer or from Wilson and Hilferty's approximation
//! (Proc. Natl. Acad. Sci. 17 (1931) 684-688), in one to four evaluations of the incomplete gamma function.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};
use statrs::distribution::{Beta, ContinuousCDF, FisherSnedecor, StudentsT};
use statrs::function::erf::erfc_inv;
use statrs::function::gamma::{checked_gamma_ur, ln_gamma};

/// Degrees of freedom beyond which Wilson and Hilferty's approximation is used as it is: its relative error
/// falls as `1/h^{3/2}` and is below 3e-6 there.
const MANY: f64 = 1e4;
/// Fewest degrees of freedom told apart: a statistic whose spread is twice its mean. With fewer, winsorising takes
/// most of the variance and what it left no longer tells how much there was.
const FEW: f64 = 0.5;
/// Newton steps after which the last value stands; five suffice from a fair start.
const STEPS: usize = 40;
/// Relative step at which the quantile is settled.
const SETTLED: f64 = 1e-13;

/// Standard normal quantile.
#[must_use]
pub fn normal(tail: f64) -> f64 {
    std::f64::consts::SQRT_2 * erfc_inv(2.0 * tail)
}

/// Quantile of chi-square with `h` degrees of freedom, not necessarily whole; relative error about 1e-13 up to
/// `h = 1e4`.
#[must_use]
pub fn chi_square(h: f64, tail: f64) -> f64 {
    ChiSquare::at(h, tail).value
}

/// A chi-square quantile with what the winsorised moments need of it, refined from one `h` to the next.
#[derive(Clone, Copy, Debug)]
pub struct ChiSquare {
    /// Degrees of freedom.
    pub h: f64,
    /// Probability beyond.
    pub tail: f64,
    /// The quantile.
    pub value: f64,
    /// `E[min(X, value)] / h`: what winsorising at the quantile leaves of the mean.
    pub mean_left: f64,
    /// What it leaves of the variance `2 h`.
    pub variance_left: f64,
    /// What it leaves of the third central moment `8 h`.
    pub third_left: f64,
}

impl ChiSquare {
    /// The quantile, from nothing.
    #[must_use]
    pub fn at(h: f64, tail: f64) -> Self {
        let h = if h.is_nan() { MANY } else { h.clamp(FEW, 1e12) };
        let start = wilson_hilferty(h, normal(tail)) * h;
        Self { h, tail, value: start, mean_left: 1.0, variance_left: 1.0, third_left: 1.0 }.refined(h)
    }

    /// The same at other degrees of freedom, started from this one.
    #[must_use]
    pub fn refined(mut self, h: f64) -> Self {
        self.h = if h.is_nan() { MANY } else { h.clamp(FEW, 1e12) };
        if self.h > MANY {
            self.value = wilson_hilferty(self.h, normal(self.tail)) * self.h;
            // The normal limit: what winsorising at z leaves, of a mean that dwarfs the spread.
            self.mean_left = 1.0;
            self.variance_left = normal_variance_left(normal(self.tail), self.tail);
            self.third_left = 1.0;
            return self;
        }
        let a = 0.5 * self.h;
        let ln_gamma_a1 = ln_gamma(a + 1.0);
        // Half the quantile: the argument of the incomplete gamma function.
        let mut x = (0.5 * self.value).max(f64::MIN_POSITIVE);
        // `term = x^a e^-x / Gamma(a + 1)`; the density at x is `a term / x`.
        let mut term = f64::NAN;
        for _ in 0..STEPS {
            term = (a * x.ln() - x - ln_gamma_a1).exp();
            let Ok(beyond) = checked_gamma_ur(a, x) else { break };
            let density = a * term / x;
            if beyond <= 0.0 || density <= 0.0 {
                x *= 0.5;
                continue;
            }
            let step = (beyond / self.tail).ln() * beyond / density;
            let next = (x + step).clamp(0.25 * x, 4.0 * x);
            let moved = (next - x).abs();
            x = next;
            if moved <= SETTLED * x {
                break;
            }
            // A step this small leaves an error of its square: no further evaluation is worth its time.
            if moved <= 1e-7 * x {
                term = (a * x.ln() - x - ln_gamma_a1).exp();
                break;
            }
        }
        self.value = 2.0 * x;
        // Q(a+1, x) = Q(a, x) + x^a e^-x / Gamma(a+1), and once more.
        let beyond_1 = self.tail + term;
        let beyond_2 = beyond_1 + term * x / (a + 1.0);
        let mean = self.h * (1.0 - beyond_1) + self.value * self.tail;
        let square = self.h * (self.h + 2.0) * (1.0 - beyond_2) + self.value * self.value * self.tail;
        let beyond_3 = beyond_2 + term * x * x / ((a + 1.0) * (a + 2.0));
        let cube =
            self.h * (self.h + 2.0) * (self.h + 4.0) * (1.0 - beyond_3) + self.value.powi(3) * self.tail;
        self.mean_left = mean / self.h;
        self.variance_left = (square - mean * mean) / (2.0 * self.h);
        self.third_left = (cube - 3.0 * mean * square + 2.0 * mean.powi(3)) / (8.0 * self.h);
        self
    }
}

/// Variance of a standard normal winsorised above at `z`, whose upper tail is `tail`.
fn normal_variance_left(z: f64, tail: f64) -> f64 {
    let density = (-0.5 * z * z).exp() / std::f64::consts::TAU.sqrt();
    let mean = z * tail - density;
    let square = (1.0 - tail) - z * density + z * z * tail;
    square - mean * mean
}

/// Wilson and Hilferty: the quantile of chi-square over its degrees of freedom, at normal quantile `z`.
#[must_use]
pub fn wilson_hilferty(h: f64, z: f64) -> f64 {
    let v = 2.0 / (9.0 * h);
    (1.0 - v + z * v.sqrt()).max(0.0).powi(3)
}

/// Quantile of Fisher's F; infinite where the degrees of freedom are not positive.
#[must_use]
pub fn fisher(d1: f64, d2: f64, tail: f64) -> f64 {
    FisherSnedecor::new(d1, d2).map_or(f64::INFINITY, |f| f.inverse_cdf(1.0 - tail))
}

/// Quantile of the beta distribution; 1 where its parameters are not positive.
#[must_use]
pub fn beta(a: f64, b: f64, tail: f64) -> f64 {
    Beta::new(a, b).map_or(1.0, |f| f.inverse_cdf(1.0 - tail))
}

/// Degrees of freedom from which the expansion of Student's quantile in `1/nu` is used; its relative error at the tails in
/// use is below 1e-4 there and falls with the fifth power.
const EXPANDED: f64 = 30.0;

/// Quantile of Student's t with `nu` degrees of freedom, at least 1. From 30 on by Abramowitz and Stegun's expansion
/// 26.7.5: it is asked for as the watch runs.
#[must_use]
pub fn student(nu: f64, tail: f64) -> f64 {
    let nu = nu.max(1.0);
    let z = normal(tail);
    if nu < EXPANDED {
        return StudentsT::new(0.0, 1.0, nu).map_or(z, |t| t.inverse_cdf(1.0 - tail));
    }
    let s = z * z;
    let terms = [
        (s + 1.0) * z / 4.0,
        ((5.0 * s + 16.0) * s + 3.0) * z / 96.0,
        (((3.0 * s + 19.0) * s + 17.0) * s - 15.0) * z / 384.0,
        ((((79.0 * s + 776.0) * s + 1482.0) * s - 1920.0) * s - 945.0) * z / 92_160.0,
    ];
    z + terms.iter().rev().fold(0.0, |sum, term| (sum + term) / nu)
}

/// Five numbers: degrees of freedom, quantile, and what winsorising leaves of mean, variance and third moment.
impl Part for ChiSquare {
    fn write(&self, to: &mut Writer) {
        let Self { h, tail: _, value, mean_left, variance_left, third_left } = *self;
        to.numbers("chi_square", &[h, value, mean_left, variance_left, third_left]);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let numbers = from.numbers("chi_square", 5)?;
        let [h, value, mean_left, variance_left, third_left] = numbers[..] else { return Ok(()) };
        if h < FEW || value < 0.0 || variance_left <= 0.0 {
            return Err(from.unlike("chi_square", "degrees of freedom, quantile and variance", "others"));
        }
        *self = Self { h, tail: self.tail, value, mean_left, variance_left, third_left };
        Ok(())
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
mod tests {
    use super::*;

    /// Upper quantiles computed with 18 digits by a multiple-precision library: level, h, quantile.
    const CHI_SQUARE: &[(f64, f64, f64)] = &[
        (0.95, 1.0, 3.841_458_820_694_126),
        (0.95, 2.0, 5.991_464_547_107_982),
        (0.95, 5.0, 11.070_497_693_516_354),
        (0.95, 52.0, 69.832_160_339_848_13),
        (0.99, 3.0, 11.344_866_730_144_372),
        (0.99, 26.0, 45.641_682_666_283_15),
        (0.995, 11.0, 26.756_848_916_469_635),
        (0.995, 26.0, 48.289_882_332_456_84),
        (0.999, 1.0, 10.827_566_170_662_732),
        (0.999, 5.0, 20.515_005_652_432_88),
        (0.999, 52.0, 89.272_150_834_304_48),
    ];

    #[test]
    fn chi_square_quantiles_have_thirteen_digits() {
        for &(level, h, expected) in CHI_SQUARE {
            let tail = 1.0 - level;
            // 1 - level carries eps/tail of relative error, and so does the quantile.
            let tolerance = (1e-13 + 4.0 * f64::EPSILON / tail) * expected;
            assert!((chi_square(h, tail) - expected).abs() <= tolerance, "{level} {h}");
            let near = ChiSquare::at(h * 1.02, tail).refined(h).value;
            assert!((near - expected).abs() <= tolerance, "refined {level} {h}: {near}");
        }
    }

    #[test]
    fn f_and_normal_quantiles_have_twelve_digits() {
        for (level, d1, d2, expected) in [
            (0.95, 2.0, 13.0, 3.805_565_252_978_058),
            (0.99, 11.0, 489.0, 2.284_101_678_178_326),
            (0.995, 5.0, 95.0, 3.602_608_863_960_119_3),
            (0.999, 3.0, 268.0, 5.579_347_682_274_807),
        ] {
            assert!((fisher(d1, d2, 1.0 - level) / expected - 1.0).abs() < 1e-12, "{level} {d1} {d2}");
        }
        assert!((normal(0.05) - 1.644_853_626_951_472_7).abs() < 1e-14);
        assert!((normal(0.001) - 3.090_232_306_167_813_5).abs() < 1e-14);
    }

    #[test]
    fn the_expansion_of_students_quantile_meets_the_library_where_it_takes_over() {
        for tail in [1e-2, 1e-3, 2.5e-4] {
            let exact = StudentsT::new(0.0, 1.0, EXPANDED).unwrap().inverse_cdf(1.0 - tail);
            assert!((student(EXPANDED, tail) / exact - 1.0).abs() < 1e-4, "{tail}");
        }
        assert!((student(1e9, 1e-3) - normal(1e-3)).abs() < 1e-6);
    }

    #[test]
    fn quantiles_far_out_and_at_odd_degrees_are_finite_and_ordered() {
        for h in [1e-9, 0.5, 0.7, 1.0, 7.3, 9_999.0, 10_001.0, 1e15, f64::NAN] {
            let mut last = f64::INFINITY;
            for tail in [1e-12, 1e-6, 2.5e-4, 1e-2, 0.3] {
                let q = chi_square(h, tail);
                assert!(q.is_finite() && q >= 0.0 && q < last, "h {h} tail {tail}: {q} after {last}");
                last = q;
            }
        }
    }

    #[test]
    fn approximation_meets_the_exact_quantile_where_it_takes_over() {
        for tail in [1e-2, 2.5e-4, 1e-6] {
            let exact = ChiSquare::at(MANY, tail).value;
            let approximate = wilson_hilferty(MANY, normal(tail)) * MANY;
            assert!((exact / approximate - 1.0).abs() < 3e-6, "{exact} {approximate}");
        }
    }

    #[test]
    fn winsorised_moments_agree_with_quadrature() {
        for (h, tail) in [(3.0, 0.05), (8.5, 2.5e-4), (60.0, 0.01)] {
            let q = ChiSquare::at(h, tail);
            let a = 0.5 * h;
            let steps = 400_000;
            let top = q.value;
            let (mut m1, mut m2, mut m3) = (top * tail, top * top * tail, top.powi(3) * tail);
            for i in 0..steps {
                let x = (f64::from(i) + 0.5) / f64::from(steps) * top;
                let density = ((a - 1.0) * (0.5 * x).ln() - 0.5 * x - ln_gamma(a)).exp() * 0.5;
                let mass = density * top / f64::from(steps);
                m1 += x * mass;
                m2 += x * x * mass;
                m3 += x.powi(3) * mass;
            }
            assert!((q.mean_left - m1 / h).abs() < 1e-6, "{h} {tail}");
            assert!((q.variance_left - (m2 - m1 * m1) / (2.0 * h)).abs() < 1e-5, "{h} {tail}");
            let third = m3 - 3.0 * m1 * m2 + 2.0 * m1.powi(3);
            assert!((q.third_left - third / (8.0 * h)).abs() < 1e-4, "{h} {tail}");
        }
    }
}
