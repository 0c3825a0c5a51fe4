//! A streamed quantile of the upper tail, with forgetting.
//!
//! Values are counted in buckets of equal ratio, `2^(1/128)`: the quantile is right to half a per cent whatever the
//! distribution. Forgetting costs nothing: instead of the old counts shrinking, each new one weighs more, and all are
//! scaled down before they grow too large. A cursor stands in the bucket of the quantile and moves by a bucket or two.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Buckets a doubling of the value.
const PER_OCTAVE: f64 = 128.0;
/// Sixteen octaves: up to 2^14 times the reference value. What is below counts in the first bucket, what is above in the
/// last.
const BUCKETS: usize = 128 * 16;
/// The lowest bucket starts at a quarter of the reference value.
const LOWEST: f64 = -2.0;
/// Weight of a new count at which all counts are scaled down.
const LARGE: f64 = 1e100;
/// Rows that must lie beyond a level before it is read from the counts.
const RESOLVED: f64 = 10.0;

/// Counts of a statistic in buckets of equal ratio.
#[derive(Clone, Debug)]
pub struct Histogram {
    counts: Vec<f64>,
    reference: f64,
    weight: f64,
    total: f64,
    cursor: usize,
    /// Counts in the buckets above the cursor's.
    above: f64,
}

impl Histogram {
    /// No counts; `reference` is a typical value of the statistic. 16 KiB.
    #[must_use]
    pub fn new(reference: f64) -> Self {
        let reference = if reference > 0.0 { reference } else { f64::MIN_POSITIVE };
        Self { counts: vec![0.0; BUCKETS], reference, weight: 1.0, total: 0.0, cursor: 0, above: 0.0 }
    }

    /// Forgets all counts; `reference` is a typical value from here on.
    pub fn clear(&mut self, reference: f64) {
        self.counts.fill(0.0);
        self.reference = if reference > 0.0 { reference } else { f64::MIN_POSITIVE };
        (self.weight, self.total, self.cursor, self.above) = (1.0, 0.0, 0, 0.0);
    }

    /// Takes in `value`; what came before keeps the share `keep` of its weight.
    pub fn learn(&mut self, value: f64, keep: f64) {
        self.weight /= keep;
        if self.weight > LARGE {
            self.rescale();
        }
        let bucket = self.bucket(value);
        self.counts[bucket] += self.weight;
        self.total += self.weight;
        if bucket > self.cursor {
            self.above += self.weight;
        }
    }

    /// The value with probability `tail` beyond, read where at least ten of the `n` rows lie beyond; the pair is the
    /// value and the probability beyond it.
    pub fn quantile(&mut self, tail: f64, n: f64) -> Option<(f64, f64)> {
        let level = tail.max(RESOLVED / n);
        if !(level < 0.5 && self.total > 0.0) {
            return None;
        }
        let target = level * self.total;
        while self.above > target && self.cursor + 1 < BUCKETS {
            self.cursor += 1;
            self.above -= self.counts[self.cursor];
        }
        while self.above + self.counts[self.cursor] < target && self.cursor > 0 {
            self.above += self.counts[self.cursor];
            self.cursor -= 1;
        }
        let count = self.counts[self.cursor];
        let inside = if count > 0.0 { ((target - self.above) / count).clamp(0.0, 1.0) } else { 0.0 };
        let octave = LOWEST + (self.cursor as f64 + 1.0 - inside) / PER_OCTAVE;
        Some((self.reference * octave.exp2(), level))
    }

    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "clamped to the buckets first"
    )]
    fn bucket(&self, value: f64) -> usize {
        let place = ((value / self.reference).max(f64::MIN_POSITIVE).log2() - LOWEST) * PER_OCTAVE;
        place.clamp(0.0, (BUCKETS - 1) as f64) as usize
    }

    fn rescale(&mut self) {
        let factor = 1.0 / self.weight;
        self.weight = 1.0;
        for count in &mut self.counts {
            // Below this a count is lost in the total anyway; subnormals would only be slow.
            *count = if *count * factor < 1e-30 { 0.0 } else { *count * factor };
        }
        self.total = self.counts.iter().sum();
        self.above = self.counts[self.cursor + 1..].iter().sum();
    }
}

impl Part for Histogram {
    fn write(&self, to: &mut Writer) {
        let Self { counts, reference, weight, total, cursor, above } = self;
        to.numbers("counts", counts);
        to.number("reference", *reference);
        to.number("weight", *weight);
        to.number("total", *total);
        to.word("cursor", cursor);
        to.number("above", *above);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.counts = from.amounts("counts", BUCKETS)?;
        self.reference = from.amount("reference")?;
        self.weight = from.amount("weight")?;
        if self.reference <= 0.0 || !(1.0..=LARGE).contains(&self.weight) {
            return Err(from.unlike("reference", "a positive one, and a weight of 1 or more", "others"));
        }
        self.total = from.amount("total")?;
        self.cursor = from.at_most("cursor", BUCKETS - 1)?;
        // Differences of sums: a rounding below zero is what they may come to.
        self.above = from.number("above")?;
        Ok(())
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
mod tests {
    use super::*;

    fn uniform(state: &mut u64) -> f64 {
        *state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        ((*state >> 11) as f64 + 0.5) / 9_007_199_254_740_992.0
    }

    #[test]
    fn quantile_of_an_exponential_stream_is_right_to_sampling_error() {
        let mut histogram = Histogram::new(1.0);
        let mut state = 7;
        for _ in 0..400_000 {
            histogram.learn(-uniform(&mut state).ln(), 1.0);
        }
        let (value, level) = histogram.quantile(1e-3, 400_000.0).unwrap();
        assert!((level - 1e-3).abs() < 1e-15);
        // 400 rows lie beyond: 5 % of spread in the tail, 0.05 in the quantile; four of those, and half a bucket.
        assert!((value - 1e3_f64.ln()).abs() < 4.0 * 0.05 + 0.005 * value, "{value}");
    }

    #[test]
    fn forgetting_follows_a_change_of_scale() {
        let mut histogram = Histogram::new(1.0);
        let mut state = 11;
        for i in 0..600_000 {
            let scale = if i < 300_000 { 1.0 } else { 3.0 };
            histogram.learn(-scale * uniform(&mut state).ln(), 1.0 - 1.0 / 20_000.0);
        }
        let (value, _) = histogram.quantile(1e-2, 40_000.0).unwrap();
        assert!((value / (3.0 * 100_f64.ln()) - 1.0).abs() < 0.05, "{value}");
    }

    #[test]
    fn a_level_that_few_rows_cannot_tell_is_not_read() {
        let mut histogram = Histogram::new(1.0);
        for i in 0..100 {
            histogram.learn(1.0 + f64::from(i) * 0.01, 1.0);
        }
        let (value, level) = histogram.quantile(1e-3, 100.0).unwrap();
        assert!((level - 0.1).abs() < 1e-12 && (value - 1.9).abs() < 0.02, "{value} at {level}");
        assert!(histogram.quantile(1e-3, 10.0).is_none());
    }

    #[test]
    fn values_out_of_range_stay_countable() {
        let mut histogram = Histogram::new(0.0);
        for value in [0.0, 1e300, f64::MIN_POSITIVE, 1e-320] {
            for _ in 0..100 {
                histogram.learn(value, 0.5);
            }
        }
        assert!(histogram.quantile(0.1, 1e3).is_some_and(|(value, _)| value.is_finite()));
    }
}
