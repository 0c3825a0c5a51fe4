//! The smoothed statistic: an exponentially weighted moving average with a limit of its own, for small lasting shifts.
//!
//! `z <- z + share (u - z)` (Roberts, Technometrics 1 (1959) 239-250; run lengths in Lucas and Saccucci,
//! Technometrics 32 (1990) 1-12). The statistic averaged is the cube root `u = (x / mean)^(1/3)`, which is close to
//! normal where `x` is close to chi-square (Wilson and Hilferty 1931), so one far row does not rule the average.
//!
//! The spread of `z` is the larger of two: what its own healthy moments say, and what the moments of `u` say for a
//! series with lag-one correlation `r`,
//! `var u * share / (2 - share) * (1 + (1 - share) r) / (1 - (1 - share) r)`.
//! The first knows correlation of any kind, but a smoothed series holds few independent values, so it may come out too
//! small by chance; the second rests on many more. The limit is widened by the few, and by the skewness that the
//! cube root left: `(z^2 - 1) / 6` times it (Cornish and Fisher, Rev. Inst. Int. Stat. 5 (1938) 307-320), else a skewness
//! of 0.2, common where rows are correlated, doubles the rate at which it is passed.

use super::limits::moments::Moments;
use super::limits::{SKEWED, Widening};
use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Weight of the newest value. A tenth sits where the published run lengths are shortest for lasting shifts of half a
/// spread to one spread, the shifts that single rows do not show.
pub const SHARE: f64 = 0.1;

/// Skewness up to which the correction of the limit is a correction.
const MOST_SKEWED: f64 = 1.0;

/// An average that leans on the last tens of rows, in spreads of its healthy self.
#[derive(Clone, Debug)]
pub struct Smooth {
    share: f64,
    level: f64,
    centre: f64,
    spread: f64,
    /// What skewness adds to the limit.
    skew: f64,
    widening: Widening,
}

impl Smooth {
    /// With weight `share` on the newest value and probability `tail` beyond its limit.
    #[must_use]
    pub fn new(share: f64, tail: f64) -> Self {
        let widening = Widening::new(tail);
        Self { share, level: 0.0, centre: 0.0, spread: 1.0, skew: 0.0, widening }
    }

    /// Starts at the mean of a series `u` with these moments.
    pub fn start(&mut self, series: &Moments) {
        self.level = series.mean();
        self.refresh(series, &Moments::default());
    }

    /// Takes in the newest value.
    pub fn take(&mut self, value: f64) {
        self.level += self.share * (value - self.level);
    }

    /// The average, in healthy spreads from its healthy centre.
    #[must_use]
    pub fn value(&self) -> f64 {
        (self.level - self.centre) / self.spread
    }

    /// The limit on [`Smooth::value`].
    #[must_use]
    pub fn limit(&self) -> f64 {
        (self.widening.normal() + self.skew) * self.widening.factor()
    }

    /// The present level, winsorised at the limit: what is to be learned of it.
    #[must_use]
    pub fn winsorised(&self) -> f64 {
        self.level.min(self.centre + self.limit() * self.spread)
    }

    /// Moves centre, spread and limit to the present moments: `series` of the values taken in, `levels` of what became of
    /// them.
    pub fn refresh(&mut self, series: &Moments, levels: &Moments) {
        let known = levels.count() > 1.0;
        self.centre = if known { levels.mean() } else { series.mean() };
        let own = if known { levels.variance() } else { 0.0 };
        let variance = own.max(averaged(series.variance(), series.correlation(), self.share));
        // A series that never moves: any finite spread will do, its value is zero.
        self.spread = if variance > 0.0 { variance.sqrt() } else { 1.0 };
        let independent = if known { levels.independent() } else { series.independent() * self.share };
        self.widening.follow(independent, 0.0);
        let z = self.widening.normal();
        let counted = independent / (independent + SKEWED);
        let skewness = if known { levels.skewness().clamp(0.0, MOST_SKEWED) * counted } else { 0.0 };
        self.skew = (z * z - 1.0) / 6.0 * skewness;
    }

    /// As if all values had been `factor` times what they were; centre and spread follow with the next refresh.
    pub fn scale(&mut self, factor: f64) {
        self.level *= factor;
    }

    /// Back to the healthy centre.
    pub fn reset(&mut self) {
        self.level = self.centre;
    }
}

/// Variance of the average of a series with variance `variance` and lag-one correlation `r`.
#[must_use]
pub fn averaged(variance: f64, r: f64, share: f64) -> f64 {
    let kept = (1.0 - share) * r;
    variance * share / (2.0 - share) * (1.0 + kept) / (1.0 - kept)
}

impl Part for Smooth {
    fn write(&self, to: &mut Writer) {
        let Self { share: _, level, centre, spread, skew, widening } = self;
        to.number("level", *level);
        to.number("centre", *centre);
        to.number("spread", *spread);
        to.number("skew", *skew);
        to.part("widening", widening);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.level = from.amount("level")?;
        self.centre = from.amount("centre")?;
        self.spread = from.amount("spread")?;
        if self.spread <= 0.0 {
            return Err(from.unlike("spread", "a positive number", "0"));
        }
        self.skew = from.amount("skew")?;
        from.part("widening", &mut self.widening)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Normal(u64);

    impl Normal {
        fn uniform(&mut self) -> f64 {
            self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            ((self.0 >> 11) as f64 + 0.5) / 9_007_199_254_740_992.0
        }

        fn draw(&mut self) -> f64 {
            (-2.0 * self.uniform().ln()).sqrt() * (std::f64::consts::TAU * self.uniform()).cos()
        }
    }

    /// Zero-state run lengths of the two-sided chart with asymptotic limits, from the integral equation, after Lucas
    /// and Saccucci (1990): share, limit, shift, run length.
    const RUN_LENGTHS: &[(f64, f64, f64, f64)] = &[
        (0.1, 2.814, 0.0, 499.579_550),
        (0.1, 2.814, 0.5, 31.297_435),
        (0.1, 2.814, 1.0, 10.330_665),
        (0.1, 2.814, 2.0, 4.362_253),
        (0.25, 2.998, 0.5, 48.293_875),
        (0.4, 3.054, 1.0, 14.262_764),
        (0.05, 2.615, 0.25, 84.005_862),
    ];

    #[test]
    fn run_lengths_agree_with_the_published_ones() {
        let mut normal = Normal(2_024);
        for &(share, limit, shift, expected) in RUN_LENGTHS {
            let runs = if expected > 200.0 { 1_500 } else { 4_000 };
            let mut total = 0_u64;
            for _ in 0..runs {
                let mut smooth = Smooth::new(share, 1e-3);
                smooth.spread = averaged(1.0, 0.0, share).sqrt();
                loop {
                    total += 1;
                    smooth.take(normal.draw() + shift);
                    if smooth.value().abs() > limit {
                        break;
                    }
                }
            }
            let mean = total as f64 / f64::from(runs);
            // The spread of a run length is at most about its mean; four standard errors.
            let tolerance = 4.0 * expected / f64::from(runs).sqrt();
            assert!(
                (mean - expected).abs() < tolerance,
                "{share} {limit} {shift}: {mean} against {expected}"
            );
        }
    }

    #[test]
    fn variance_of_the_average_of_a_correlated_series_is_right() {
        let mut normal = Normal(5);
        for r in [0.0_f64, 0.5, 0.9] {
            let (mut series, mut own) = (Moments::default(), Moments::default());
            let mut smooth = Smooth::new(SHARE, 1e-3);
            let mut x = 0.0;
            for _ in 0..400_000 {
                x = r * x + (1.0 - r * r).sqrt() * normal.draw();
                smooth.take(x);
                series.learn(x, 1.0);
                own.learn(smooth.level, 1.0);
            }
            let said = averaged(series.variance(), series.correlation(), SHARE);
            assert!((said / own.variance() - 1.0).abs() < 0.06, "{r}: {said} against {}", own.variance());
        }
    }

    #[test]
    fn the_limit_is_wide_while_few_rows_are_known() {
        let mut normal = Normal(9);
        let mut smooth = Smooth::new(SHARE, 1e-3);
        let (mut series, mut levels) = (Moments::default(), Moments::default());
        let mut limits = Vec::new();
        for i in 1..=20_000 {
            let u = normal.draw();
            series.learn(u, 1.0);
            smooth.take(u);
            levels.learn(if i > 300 { smooth.winsorised() } else { smooth.level }, 1.0);
            if i == 300 || i == 20_000 {
                smooth.refresh(&series, &levels);
                limits.push(smooth.limit());
            }
        }
        assert!(limits[0] > 1.1 * limits[1], "{limits:?}");
        assert!(limits[1] < 1.03 * 3.1, "{limits:?}");
    }
}
