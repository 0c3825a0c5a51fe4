//! Channels that stand still or fall silent.
//!
//! While settling, each channel shows how long it repeats a value (coarse resolution, slow analysers) and how long it
//! goes without one. The chance of a run falls geometrically with its length: one twice as long as the longest among
//! `n` rows comes about once in `n^2`. A channel is stuck, or vanished, when its run is that long and a few rows more.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Rows beyond twice the longest healthy run: a sensor that never repeats a value is stuck at its twelfth.
const MARGIN: u32 = 10;

/// Runs of equal values and of gaps, a channel each.
#[derive(Clone, Debug)]
pub struct Runs {
    last: Vec<f64>,
    still: Vec<u32>,
    silent: Vec<u32>,
    longest_still: Vec<u32>,
    longest_silent: Vec<u32>,
}

impl Runs {
    /// Nothing seen yet.
    #[must_use]
    pub fn new(channels: usize) -> Self {
        Self {
            last: vec![f64::NAN; channels],
            still: vec![0; channels],
            silent: vec![0; channels],
            longest_still: vec![1; channels],
            longest_silent: vec![0; channels],
        }
    }

    /// Takes in a row; `settling` lets it show what is usual.
    #[expect(clippy::float_cmp, reason = "a stuck sensor repeats its value to the last bit")]
    pub fn take(&mut self, row: &[f64], settling: bool) {
        for (channel, &value) in row.iter().enumerate() {
            if value.is_nan() {
                self.silent[channel] = self.silent[channel].saturating_add(1);
                continue;
            }
            self.silent[channel] = 0;
            let repeats = value == self.last[channel];
            self.still[channel] = if repeats { self.still[channel].saturating_add(1) } else { 1 };
            self.last[channel] = value;
        }
        if settling {
            for channel in 0..row.len() {
                self.longest_still[channel] = self.longest_still[channel].max(self.still[channel]);
                self.longest_silent[channel] = self.longest_silent[channel].max(self.silent[channel]);
            }
        }
    }

    /// Whether `channel` has repeated its value for longer than is usual of it.
    #[must_use]
    pub fn stuck(&self, channel: usize) -> bool {
        self.silent[channel] == 0 && self.still[channel] > usual(self.longest_still[channel])
    }

    /// Whether `channel` has gone without a value for longer than is usual of it.
    #[must_use]
    pub fn vanished(&self, channel: usize) -> bool {
        self.silent[channel] > usual(self.longest_silent[channel])
    }
}

fn usual(longest: u32) -> u32 {
    longest.saturating_mul(2).saturating_add(MARGIN)
}

/// A row a property, a column a channel.
impl Part for Runs {
    fn write(&self, to: &mut Writer) {
        let Self { last, still, silent, longest_still, longest_silent } = self;
        to.table("last", last.len(), last);
        let counts = [still, silent, longest_still, longest_silent];
        let counts: Vec<f64> = counts.into_iter().flatten().map(|count| f64::from(*count)).collect();
        to.table("lengths", last.len(), &counts);
    }

    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "as saturates, NaN is 0")]
    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let channels = self.last.len();
        let last = from.table("last", channels, 1)?;
        let counts = from.table("lengths", channels, 4)?;
        if last.len() != channels || counts.len() != 4 * channels {
            return Err(from.unlike("lengths", "four rows, and one of last values", "fewer"));
        }
        self.last = last;
        let into = [&mut self.still, &mut self.silent, &mut self.longest_still, &mut self.longest_silent];
        for (target, row) in into.into_iter().zip(counts.chunks_exact(channels)) {
            target.iter_mut().zip(row).for_each(|(target, count)| *target = *count as u32);
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_fine_sensor_is_stuck_after_a_dozen_rows_and_a_slow_analyser_is_not() {
        let mut runs = Runs::new(2);
        let analyser = |row: i32| f64::from(row / 15);
        for row in 0..300 {
            runs.take(&[f64::from(row) * 0.1, analyser(row)], true);
        }
        for row in 300..320 {
            runs.take(&[30.0, analyser(row)], false);
            assert_eq!(runs.stuck(0), row >= 312, "{row}");
            assert!(!runs.stuck(1));
        }
        runs.take(&[30.1, 20.0], false);
        assert!(!runs.stuck(0));
    }

    #[test]
    fn a_channel_vanishes_after_a_longer_silence_than_is_usual() {
        let mut runs = Runs::new(1);
        for row in 0..100 {
            runs.take(&[if row % 10 < 3 { f64::NAN } else { f64::from(row) }], true);
        }
        for row in 0..30 {
            runs.take(&[f64::NAN], false);
            assert_eq!(runs.vanished(0), row >= 16, "{row}");
        }
        assert!(!runs.stuck(0));
    }
}
