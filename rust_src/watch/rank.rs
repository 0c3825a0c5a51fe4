//! How many axes: those along which the channels move together by more than chance.
//!
//! A fixed share of the variance chooses badly: of weakly related channels it takes nearly all and leaves rounding noise as
//! the residual, of strongly related ones too few. Instead each axis is compared with what chance would give (parallel
//! analysis: Horn, Psychometrika 30 (1965) 179-185), in a form that respects time and scale: the same channels,
//! each shifted in time by its own amount, move as before one by one but no longer together. The axes are taken off one after
//! another, and what is left is compared with what is left, shifted; so a dominant axis does not hide the smaller ones.
//! Channels that all follow the same day move together however they are shifted; partial correlations see through that
//! (`partial`) and miss what is only weakly shared, so the larger of the two counts is taken.
//! After `k` axes the rows lie in `channels - k` dimensions but their shifted copies in all of them: their energy is
//! raised by that ratio.

use super::partial::count_shared;
use crate::error::Error;
use crate::ops;

/// Shifted copies an axis is compared with; it must exceed each of them, which an axis of pure chance does one time in
/// nine. One axis too many costs little, one too few leaves a shared movement in the residual.
const COPIES: usize = 8;
/// Steps of the power method at most, and the relative change of the energy that ends it: the comparison needs a
/// per cent, not digits.
const STEPS: usize = 60;
const SETTLED: f64 = 1e-4;
/// Shifts are multiples of this share of the rows: the golden ratio spreads them evenly whatever their number.
const GOLDEN: f64 = 0.618_033_988_749_894_9;

/// Axes worth keeping of `rows` (row-major, `channels` wide, columns with mean zero; those that do not `move` are
/// zero): between 1 and `most`. About `10 steps (k + 1)` products of the rows with a vector, and what the partial
/// correlations take.
///
/// # Errors
/// [`Error::NoConvergence`], never seen.
pub fn choose(rows: Vec<f64>, channels: usize, moving: usize, most: usize) -> Result<usize, Error> {
    let shared = count_shared(&rows, channels, moving, most)?;
    Ok(beyond_chance(rows, channels, moving, most).max(shared))
}

/// Axes that hold more than shifted copies of the same channels do.
fn beyond_chance(mut rows: Vec<f64>, channels: usize, moving: usize, most: usize) -> usize {
    let count = rows.len() / channels;
    let mut power = Power::new(count, channels);
    let mut shifted = vec![0.0; rows.len()];
    for rank in 0..most {
        let energy = power.largest(&rows);
        let axis = power.axis.clone();
        let raise = moving as f64 / (moving - rank) as f64;
        for copy in 0..COPIES {
            shift(&rows, channels, copy, &mut shifted);
            if power.largest(&shifted) * raise >= energy {
                return rank.max(1);
            }
        }
        for row in rows.chunks_exact_mut(channels) {
            let score = ops::dot(row, &axis);
            row.iter_mut().zip(&axis).for_each(|(value, entry)| *value -= score * entry);
        }
    }
    most.max(1)
}

/// Each column moved down, around the end, by its own number of rows.
#[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "a share of the number of rows")]
fn shift(rows: &[f64], channels: usize, copy: usize, shifted: &mut [f64]) {
    let count = rows.len() / channels;
    for channel in 0..channels {
        let share = ((channel + 1) * (copy + 1)) as f64 * GOLDEN + 0.37 * copy as f64;
        let start = (share.fract() * count as f64) as usize;
        for row in 0..count {
            shifted[(row + start) % count * channels + channel] = rows[row * channels + channel];
        }
    }
}

/// The largest energy of a block of rows, by the power method.
struct Power {
    axis: Vec<f64>,
    scores: Vec<f64>,
}

impl Power {
    fn new(count: usize, channels: usize) -> Self {
        Self { axis: vec![0.0; channels], scores: vec![0.0; count] }
    }

    /// Sum of squares along the main axis, which is left in `axis`.
    fn largest(&mut self, rows: &[f64]) -> f64 {
        let channels = self.axis.len();
        // The longest row is a start that is not orthogonal to the main axis in any but contrived cases.
        let longest = rows.chunks_exact(channels).max_by(|a, b| ops::dot(a, a).total_cmp(&ops::dot(b, b)));
        self.axis.copy_from_slice(longest.unwrap_or(&[]));
        let mut energy = 0.0;
        for _ in 0..STEPS {
            let norm = ops::dot(&self.axis, &self.axis).sqrt();
            if norm <= 0.0 {
                return 0.0;
            }
            self.axis.iter_mut().for_each(|entry| *entry /= norm);
            for (score, row) in self.scores.iter_mut().zip(rows.chunks_exact(channels)) {
                *score = ops::dot(row, &self.axis);
            }
            let now = ops::dot(&self.scores, &self.scores);
            let settled = (now - energy).abs() <= SETTLED * now;
            energy = now;
            if settled {
                break;
            }
            self.axis.fill(0.0);
            for (score, row) in self.scores.iter().zip(rows.chunks_exact(channels)) {
                self.axis.iter_mut().zip(row).for_each(|(entry, value)| *entry += score * value);
            }
        }
        energy
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The number chosen.
    fn choose(rows: Vec<f64>, channels: usize, moving: usize, most: usize) -> usize {
        super::choose(rows, channels, moving, most).unwrap_or(0)
    }

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

    /// Rows of `drivers` shared movements and a noise of each channel's own, columns standardised; `r` is the
    /// correlation of a row with the one before.
    fn rows(count: usize, channels: usize, drivers: &[f64], noise: f64, r: f64) -> Vec<f64> {
        let mut normal = Normal(2_718);
        let mixing: Vec<f64> = (0..drivers.len() * channels).map(|_| normal.draw()).collect();
        let mut state = vec![0.0; drivers.len() + channels];
        let mut rows = Vec::with_capacity(count * channels);
        for _ in 0..count + 200 {
            for value in &mut state {
                *value = r * *value + (1.0 - r * r).sqrt() * normal.draw();
            }
            for channel in 0..channels {
                let shared: f64 = drivers
                    .iter()
                    .enumerate()
                    .map(|(d, size)| size * state[d] * mixing[d * channels + channel])
                    .sum();
                rows.push(shared + noise * state[drivers.len() + channel]);
            }
        }
        let mut rows = rows.split_off(200 * channels);
        for channel in 0..channels {
            let mean = rows.iter().skip(channel).step_by(channels).sum::<f64>() / count as f64;
            let square: f64 = rows.iter().skip(channel).step_by(channels).map(|x| (x - mean).powi(2)).sum();
            let spread = (square / count as f64).sqrt();
            rows.iter_mut().skip(channel).step_by(channels).for_each(|x| *x = (*x - mean) / spread);
        }
        rows
    }

    #[test]
    fn four_drivers_are_found_in_independent_rows() {
        let rank = choose(rows(500, 24, &[2.0, 1.5, 1.0, 0.7], 0.3, 0.0), 24, 24, 23);
        assert!((4..=5).contains(&rank), "{rank}");
    }

    #[test]
    fn channels_without_anything_in_common_get_one_axis() {
        for r in [0.0, 0.95] {
            assert!(choose(rows(500, 24, &[], 1.0, r), 24, 24, 23) <= 2, "{r}");
        }
    }

    #[test]
    fn a_dominant_driver_does_not_hide_the_rest() {
        let rank = choose(rows(500, 24, &[10.0, 1.0, 0.5], 0.1, 0.0), 24, 24, 23);
        // The dominant one leaves channels of very different spread: a few axes more may hold one channel each.
        assert!((3..=9).contains(&rank), "{rank}");
    }

    #[test]
    fn a_day_that_moves_every_channel_does_not_hide_what_few_share() {
        let mut normal = Normal(31);
        let channels = 24;
        // One day for all channels, and four small slow movements that some of them share.
        let day_of: Vec<f64> = (0..channels).map(|_| 1.0 + 0.3 * normal.draw()).collect();
        let drivers: Vec<f64> = (0..4 * channels).map(|_| normal.draw()).collect();
        let mut slow = [0.0; 4];
        let mut rows = Vec::new();
        for row in 0..1000 {
            let day = (std::f64::consts::TAU * f64::from(row) / 250.0).sin();
            for state in &mut slow {
                *state = 0.999 * *state + 0.045 * normal.draw();
            }
            for channel in 0..channels {
                let shared: f64 = (0..4).map(|d| 0.02 * slow[d] * drivers[d * channels + channel]).sum();
                rows.push(day_of[channel] * day + shared + 0.01 * normal.draw());
            }
        }
        for channel in 0..channels {
            let mean = rows.iter().skip(channel).step_by(channels).sum::<f64>() / 1000.0;
            rows.iter_mut().skip(channel).step_by(channels).for_each(|value| *value -= mean);
        }
        let (alone, both) =
            (beyond_chance(rows.clone(), channels, channels, 23), choose(rows, channels, channels, 23));
        assert!((5..=7).contains(&both), "{both}, by shifted copies alone {alone}");
        assert!(alone < 5, "{alone}");
    }

    #[test]
    fn more_channels_than_rows_are_no_obstacle() {
        let rank = choose(rows(60, 200, &[3.0, 2.0], 0.5, 0.0), 200, 200, 40);
        assert!((2..=4).contains(&rank), "{rank}");
    }

    #[test]
    fn the_cap_holds() {
        assert_eq!(choose(rows(300, 8, &[3.0, 2.0, 1.0], 0.01, 0.0), 8, 8, 2), 2);
    }
}
