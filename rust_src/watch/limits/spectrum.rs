//! Limits of the SPE from the energies that the model leaves out.
//!
//! With `theta_i = sum_j l_j^i` over the residual energies `l_j`:
//! Jackson and Mudholkar (Technometrics 21 (1979) 341-349) take a power `h0 = 1 - 2 theta_1 theta_3 / (3 theta_2^2)`
//! of the SPE as normal; Box (Ann. Math. Stat. 25 (1954) 290-302) takes `g chi2_h` with
//! `g = theta_2 / theta_1`, `h = theta_1^2 / theta_2`.

use super::quantile;

/// Sums of the first three powers of the residual energies.
#[derive(Clone, Copy, Debug, Default)]
pub struct Residuals {
    /// `theta_1`, `theta_2`, `theta_3`.
    pub theta: [f64; 3],
}

impl Residuals {
    /// Of the energies given one by one.
    pub fn of(energies: impl IntoIterator<Item = f64>) -> Self {
        let mut theta = [0.0; 3];
        for l in energies {
            theta[0] += l;
            theta[1] += l * l;
            theta[2] += l * l * l;
        }
        Self { theta }
    }

    /// With `count` more energies that together make `total`, taken as equal.
    #[must_use]
    pub fn and_equal(mut self, count: usize, total: f64) -> Self {
        if count > 0 {
            let (n, l) = (count as f64, total / count as f64);
            self.theta[0] += total;
            self.theta[1] += n * l * l;
            self.theta[2] += n * l * l * l;
        }
        self
    }

    /// Jackson and Mudholkar's limit; Box's where their power is not positive.
    #[must_use]
    pub fn jackson_mudholkar(&self, tail: f64) -> f64 {
        let [t1, t2, t3] = self.theta;
        if t1 <= 0.0 {
            return 0.0;
        }
        let h0 = 1.0 - 2.0 * t1 * t3 / (3.0 * t2 * t2);
        if h0 <= 0.0 {
            return self.chi_square(tail);
        }
        let spread = quantile::normal(tail) * (2.0 * t2 * h0 * h0).sqrt() / t1;
        t1 * (1.0 + spread + t2 * h0 * (h0 - 1.0) / (t1 * t1)).max(0.0).powf(1.0 / h0)
    }

    /// Box's limit.
    #[must_use]
    pub fn chi_square(&self, tail: f64) -> f64 {
        let [t1, t2, _] = self.theta;
        if t1 <= 0.0 { 0.0 } else { t2 / t1 * quantile::chi_square(t1 * t1 / t2, tail) }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Both formulas evaluated with 50 digits: energies, level, Jackson and Mudholkar's limit, Box's.
    const LIMITS: &[(&[f64], f64, f64, f64)] = &[
        (&[29.33, 16.41], 0.95, 140.416_513_298_108_16, 140.807_346_794_804_12),
        (&[29.33, 16.41], 0.99, 226.049_451_307_178_3, 218.988_813_470_425_3),
        (&[29.33, 16.41], 0.999, 359.989_800_885_462_44, 331.408_301_638_679_6),
        (&[1.0, 1.0], 0.95, 5.936_869_945_730_964, 5.991_464_547_107_982),
        (&[4.0, 1.0], 0.999, 49.433_298_170_030_48, 41.953_240_646_575_35),
        (&[100.0, 1.0], 0.99, 662.296_672_432_638_8, 662.929_027_904_647_6),
    ];

    #[test]
    fn limits_agree_with_the_formulas_in_fifty_digits() {
        for &(energies, level, jackson_mudholkar, chi_square) in LIMITS {
            let residuals = Residuals::of(energies.iter().copied());
            // Of 1 - level only 1/eps/tail digits are left.
            let tolerance = 1e-12 + 16.0 * f64::EPSILON / (1.0 - level);
            let got = residuals.jackson_mudholkar(1.0 - level);
            assert!((got / jackson_mudholkar - 1.0).abs() < tolerance, "{energies:?} {level}: {got}");
            let got = residuals.chi_square(1.0 - level);
            assert!((got / chi_square - 1.0).abs() < tolerance, "{energies:?} {level}: {got}");
        }
    }

    /// Jackson's ballistic missile example as printed: theta 45.74, 1129.54, 29650.12, h0 .291, limit 140.45 for the
    /// rounded h0 (Jackson 1991, section 2.7, from memory); the formula itself gives 140.43 at z = 1.645.
    #[test]
    fn limit_of_the_missile_example_of_jackson() {
        let residuals = Residuals::of([29.33, 16.41]);
        assert!((residuals.theta[0] - 45.74).abs() < 0.005);
        assert!((residuals.theta[1] - 1129.54).abs() < 0.005);
        assert!((residuals.theta[2] - 29650.12).abs() < 0.005);
        assert!((residuals.jackson_mudholkar(0.05) - 140.43).abs() < 0.03);
    }

    #[test]
    fn equal_energies_make_the_chi_square_limit_exact() {
        let equal = Residuals::default().and_equal(7, 14.0);
        let exact = 2.0 * quantile::chi_square(7.0, 1e-3);
        assert!((equal.chi_square(1e-3) / exact - 1.0).abs() < 1e-12);
        let listed = Residuals::of([2.0; 7]);
        assert!((equal.jackson_mudholkar(1e-3) / listed.jackson_mudholkar(1e-3) - 1.0).abs() < 1e-12);
    }
}
