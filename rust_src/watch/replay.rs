//! Many ticks at once: the readings as columns.

use super::reading::{Phase, Reading};

/// Readings of consecutive ticks, a column a property. `NaN` stands for what a reading has no value of.
#[derive(Clone, Debug, Default)]
pub struct Replay {
    /// Number of each tick.
    pub tick: Vec<u64>,
    /// Phases.
    pub phase: Vec<Phase>,
    /// Whether the alarm was on.
    pub alarm: Vec<bool>,
    /// The columns of numbers, in the order of [`NUMBERS`].
    pub numbers: [Vec<f64>; NUMBERS.len()],
    /// Which limits were passed, four a tick.
    pub exceeds: Vec<bool>,
    /// Principal axes in use.
    pub rank: Vec<usize>,
    /// Channels without a value.
    pub missing: Vec<usize>,
    /// Whether each channel was stuck, `channels` a tick.
    pub stuck: Vec<bool>,
    /// Whether each had vanished, `channels` a tick.
    pub vanished: Vec<bool>,
    /// Squared residuals, `channels` a tick.
    pub contributions: Vec<f64>,
}

/// Names of the columns of numbers.
pub const NUMBERS: [&str; 13] = [
    "spe",
    "spe_limit",
    "t2",
    "t2_limit",
    "spe_smooth",
    "spe_smooth_limit",
    "t2_smooth",
    "t2_smooth_limit",
    "widening",
    "weight",
    "drift",
    "captured",
    "mean_shift",
];

impl Replay {
    /// Room for `ticks` readings of `channels` channels.
    #[must_use]
    pub fn with_room(ticks: usize, channels: usize) -> Self {
        Self {
            tick: Vec::with_capacity(ticks),
            phase: Vec::with_capacity(ticks),
            alarm: Vec::with_capacity(ticks),
            numbers: std::array::from_fn(|_| Vec::with_capacity(ticks)),
            exceeds: Vec::with_capacity(4 * ticks),
            rank: Vec::with_capacity(ticks),
            missing: Vec::with_capacity(ticks),
            stuck: Vec::with_capacity(ticks * channels),
            vanished: Vec::with_capacity(ticks * channels),
            contributions: Vec::with_capacity(ticks * channels),
        }
    }

    /// Adds a reading.
    pub fn push(&mut self, reading: &Reading) {
        self.tick.push(reading.tick);
        self.phase.push(reading.phase);
        self.alarm.push(reading.alarm);
        let numbers = [
            reading.spe,
            reading.spe_limit,
            reading.t2,
            reading.t2_limit,
            reading.spe_smooth,
            reading.spe_smooth_limit,
            reading.t2_smooth,
            reading.t2_smooth_limit,
            reading.widening,
            reading.weight,
            reading.drift.angle.unwrap_or(f64::NAN),
            reading.drift.captured.unwrap_or(f64::NAN),
            reading.drift.mean_shift.unwrap_or(f64::NAN),
        ];
        for (column, number) in self.numbers.iter_mut().zip(numbers) {
            column.push(number);
        }
        self.exceeds.extend(reading.exceeds);
        self.rank.push(reading.rank);
        self.missing.push(reading.missing());
        self.stuck.extend(reading.conditions.iter().map(|condition| condition.stuck));
        self.vanished.extend(reading.conditions.iter().map(|condition| condition.vanished));
        self.contributions.extend_from_slice(&reading.contributions);
    }
}
