//! Limits of Hotelling's T2 of single rows.
//!
//! A row that helped to estimate mean and covariance cannot lie arbitrarily far out: its T2 is beta distributed. A
//! later row can: its T2 follows F (Tracy, Young and Mason, J. Quality Technology 24 (1992) 88-95).

use super::quantile;

/// Limit for a row among the `n` from which mean and covariance of `k` scores were estimated:
/// `(n-1)^2 / n  Beta(k/2, (n-k-1)/2)`.
#[must_use]
pub fn among_learned(k: usize, n: f64, tail: f64) -> f64 {
    let k = k as f64;
    if n <= k + 1.0 {
        return f64::INFINITY;
    }
    (n - 1.0) * (n - 1.0) / n * quantile::beta(0.5 * k, 0.5 * (n - k - 1.0), tail)
}

/// Limit for a row after the `n` learned ones: `k (n+1) (n-1) / (n (n-k))  F(k, n-k)`.
#[must_use]
pub fn after_learned(k: usize, n: f64, tail: f64) -> f64 {
    let k = k as f64;
    if n <= k {
        return f64::INFINITY;
    }
    k * (n + 1.0) * (n - 1.0) / (n * (n - k)) * quantile::fisher(k, n - k, tail)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Tracy, Young and Mason (1992), start-up data, p = 3, n = 14: quantiles computed from their formulas.
    #[test]
    fn limits_of_the_start_up_example_of_tracy_young_and_mason() {
        for (level, expected) in [
            (0.5, 2.441_435_922_180_226_6),
            (0.95, 6.357_087_257_519_017),
            (0.99, 8.001_072_857_458_995),
            (0.999, 9.538_513_058_321_504),
        ] {
            assert!((among_learned(3, 14.0, 1.0 - level) / expected - 1.0).abs() < 1e-12, "beta {level}");
        }
        for (level, expected) in
            [(0.95, 13.627_589_064_389_545), (0.99, 23.615_499_608_766_957), (0.999, 43.917_263_780_833)]
        {
            assert!((after_learned(3, 14.0, 1.0 - level) / expected - 1.0).abs() < 1e-12, "F {level}");
        }
    }

    /// Jackson, J. Quality Technology 12 (1980) 201-213, chemical example, p = 2, n = 15, by the same formulas.
    #[test]
    fn limits_of_the_chemical_example_of_jackson() {
        assert!((after_learned(2, 15.0, 0.05) / 8.743_042_222_226_512 - 1.0).abs() < 1e-12);
        assert!((among_learned(2, 15.0, 0.05) / 5.135_693_514_895_215 - 1.0).abs() < 1e-12);
    }

    #[test]
    fn too_few_rows_give_no_limit() {
        assert!(after_learned(5, 5.0, 0.01).is_infinite());
        assert!(among_learned(5, 6.0, 0.01).is_infinite());
    }
}
