//! Units: what a channel usually reads and how far it usually moves.
//!
//! A row enters the model as `(row - mean) / spread`, with mean and spread from the settling rows and fixed from
//! then on: verdicts do not depend on the units the channels come in. A channel that did not move, or had no values,
//! stays out of the model: its scaled value is zero, neither judged nor suspected.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// A channel moves if its range exceeds this many roundings of its magnitude. A constant that went through a
/// computation carries a few; its standard deviation is then not zero, only meaningless.
pub(super) const ROUNDINGS: f64 = 16.0;
/// Scaled values are kept within this: their squares, summed over any number of channels and divided by the
/// smallest energy in use, stay finite.
const FAR: f64 = 1e60;

/// Mean and spread of each channel.
#[derive(Clone, Debug)]
pub struct Units {
    mean: Vec<f64>,
    spread: Vec<f64>,
    moves: Vec<bool>,
    moving: usize,
}

impl Units {
    /// Of channels that do not move.
    #[must_use]
    pub fn new(channels: usize) -> Self {
        Self {
            mean: vec![0.0; channels],
            spread: vec![1.0; channels],
            moves: vec![false; channels],
            moving: 0,
        }
    }

    /// Units of the rows for which `keep` holds: `rows` is row-major. A channel needs at least `enough` values.
    #[must_use]
    pub fn of(rows: &[f64], channels: usize, keep: &[bool], enough: usize) -> Self {
        let mut units = Self::new(channels);
        for channel in 0..channels {
            let values = || {
                let column = rows.chunks_exact(channels).zip(keep).filter(|(_, keep)| **keep);
                column.map(|(row, _)| row[channel]).filter(|value| !value.is_nan())
            };
            let mut summary = Summary::default();
            values().for_each(|value| summary.take(value));
            if let Some((mean, spread)) = summary.moving(enough, values) {
                units.join(channel, mean, spread);
            }
        }
        units
    }

    /// Lets `channel` take part with the given mean and spread.
    pub fn join(&mut self, channel: usize, mean: f64, spread: f64) {
        self.mean[channel] = mean;
        self.spread[channel] = spread;
        self.moving += usize::from(!self.moves[channel]);
        self.moves[channel] = true;
    }

    /// Whether `channel` takes part.
    #[must_use]
    pub fn moves(&self, channel: usize) -> bool {
        self.moves[channel]
    }

    /// How many channels take part.
    #[must_use]
    pub fn moving(&self) -> usize {
        self.moving
    }

    /// The largest mean, in spreads: how many spreads the rounding of a row is a rounding of.
    #[must_use]
    pub fn offset(&self) -> f64 {
        let each = self.mean.iter().zip(&self.spread).zip(&self.moves);
        each.filter(|(_, moves)| **moves).map(|((mean, spread), _)| (mean / spread).abs()).fold(0.0, f64::max)
    }

    /// A scaled value of `channel` in its own unit; NaN where it takes no part.
    #[must_use]
    pub fn unscaled(&self, channel: usize, scaled: f64) -> f64 {
        if self.moves[channel] { self.mean[channel] + self.spread[channel] * scaled } else { f64::NAN }
    }

    /// Writes `scaled - less` in the channels' own units; NaN where one takes no part.
    pub fn unscale_less(&self, scaled: &[f64], less: &[f64], values: &mut [f64]) {
        // No branch within the loop: it is done at each tick.
        let units = self.mean.iter().zip(&self.spread);
        for (((value, (mean, spread)), scaled), less) in values.iter_mut().zip(units).zip(scaled).zip(less) {
            *value = mean + spread * (scaled - less);
        }
        if self.moving < values.len() {
            values
                .iter_mut()
                .zip(&self.moves)
                .filter(|(_, moves)| !**moves)
                .for_each(|(value, _)| *value = f64::NAN);
        }
    }

    /// Writes the scaled row; NaN stays NaN. Returns how many channels that take part have a value.
    pub fn scale(&self, row: &[f64], scaled: &mut [f64]) -> usize {
        let mut observed = 0;
        for channel in 0..row.len() {
            let value = (row[channel] - self.mean[channel]) / self.spread[channel];
            // Two opposite numbers near the largest float may overflow in the difference.
            let bounded = if value.is_nan() { f64::NAN } else { value.clamp(-FAR, FAR) };
            scaled[channel] = if self.moves[channel] { bounded } else { 0.0 };
            observed += usize::from(self.moves[channel] && !value.is_nan());
        }
        observed
    }
}

/// Range and magnitude of a channel's values.
#[derive(Clone, Copy, Debug, Default)]
struct Summary {
    count: usize,
    largest: f64,
    least: f64,
    most: f64,
}

impl Summary {
    fn take(&mut self, value: f64) {
        let first = self.count == 0;
        self.count += 1;
        self.largest = self.largest.max(value.abs());
        self.least = if first { value } else { self.least.min(value) };
        self.most = if first { value } else { self.most.max(value) };
    }

    /// Mean and spread, where there are `enough` values and they move. Scaled by the magnitude while summing: no
    /// finite value overflows.
    fn moving<I: Iterator<Item = f64>>(self, enough: usize, values: impl Fn() -> I) -> Option<(f64, f64)> {
        if self.count < enough.max(2) || !moves(self.least, self.most, self.largest) {
            return None;
        }
        let n = self.count as f64;
        let mean = values().map(|value| value / self.largest).sum::<f64>() / n;
        let variance = values().map(|value| (value / self.largest - mean).powi(2)).sum::<f64>() / n;
        let spread = variance.sqrt() * self.largest;
        (spread >= f64::MIN_POSITIVE).then_some((mean * self.largest, spread))
    }
}

/// Whether values between `least` and `most`, none larger than `largest`, move by more than rounding.
pub(super) fn moves(least: f64, most: f64, largest: f64) -> bool {
    0.5 * most - 0.5 * least > 0.5 * ROUNDINGS * f64::EPSILON * largest
}

impl Part for Units {
    fn write(&self, to: &mut Writer) {
        let Self { mean, spread, moves, moving: _ } = self;
        to.numbers("mean", mean);
        to.numbers("spread", spread);
        let moves: Vec<f64> = moves.iter().map(|moves| f64::from(u8::from(*moves))).collect();
        to.numbers("moves", &moves);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let channels = self.mean.len();
        self.mean = from.numbers("mean", channels)?;
        self.spread = from.numbers("spread", channels)?;
        if let Some(spread) = self.spread.iter().find(|spread| **spread < f64::MIN_POSITIVE) {
            return Err(from.unlike("spread", "positive numbers", &spread.to_string()));
        }
        self.moves = from.numbers("moves", channels)?.iter().map(|moves| *moves > 0.0).collect();
        self.moving = self.moves.iter().filter(|moves| **moves).count();
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn column(values: &[f64]) -> Units {
        Units::of(values, 1, &vec![true; values.len()], 2)
    }

    #[test]
    fn constants_are_found_by_range_whatever_their_rounding() {
        for constant in [0.0, 53.724, -1e9 / 3.0, 1e-12, 1e300] {
            let exact = vec![constant; 100];
            assert!(!column(&exact).moves(0), "{constant}");
            let rounded: Vec<f64> =
                (0..100).map(|i| constant * (1.0 + f64::from(i % 5) * f64::EPSILON)).collect();
            assert!(!column(&rounded).moves(0), "{constant} computed");
        }
    }

    #[test]
    fn a_small_movement_on_a_large_offset_is_a_movement() {
        let values: Vec<f64> = (0..100).map(|i| 1e9 + f64::from(i % 7)).collect();
        let units = column(&values);
        assert!(units.moves(0));
        let mut scaled = [0.0];
        units.scale(&[1e9 + 6.0], &mut scaled);
        assert!((scaled[0] - 1.5).abs() < 0.05);
    }

    #[test]
    fn spreads_survive_the_range_of_the_type() {
        for magnitude in [1e-300, 1.0, 1e307] {
            let values: Vec<f64> = (0..50).map(|i| magnitude * f64::from(i % 10)).collect();
            let units = column(&values);
            let mut scaled = [0.0];
            units.scale(&[9.0 * magnitude], &mut scaled);
            assert!((scaled[0] - 4.5 / 8.25_f64.sqrt()).abs() < 1e-12, "{magnitude}: {}", scaled[0]);
            units.scale(&[-f64::MAX], &mut scaled);
            assert!(scaled[0].is_finite() && scaled[0] < 0.0);
        }
    }
}
