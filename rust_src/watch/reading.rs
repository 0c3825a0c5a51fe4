//! What one tick found.

use super::drift::Drift;

/// Where the watch stands.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Phase {
    /// Learning units, rank and first limits.
    #[default]
    Settling,
    /// Within all limits, alarm off.
    Healthy,
    /// Beyond a limit, alarm off.
    Exceeding,
    /// Alarm on.
    Alarmed,
    /// Beyond a limit for so long that the row is learned with bounded influence.
    Adopting,
}

impl Phase {
    /// All of them.
    pub const ALL: [Self; 5] =
        [Self::Settling, Self::Healthy, Self::Exceeding, Self::Alarmed, Self::Adopting];

    /// Its name.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Settling => "settling",
            Self::Healthy => "healthy",
            Self::Exceeding => "exceeding",
            Self::Alarmed => "alarmed",
            Self::Adopting => "adopting",
        }
    }
}

/// Names of the four limits, in the order of [`Reading::exceeds`].
pub const LIMITS: [&str; 4] = ["spe", "t2", "spe_smooth", "t2_smooth"];

/// What is said of a channel besides its share.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Condition {
    /// No value in this row.
    pub missing: bool,
    /// The same value for longer than is usual of it.
    pub stuck: bool,
    /// No value for longer than is usual of it.
    pub vanished: bool,
}

/// What one tick found. Statistics are NaN where the row was not judged: while settling, or with too few values.
#[derive(Clone, Debug, Default)]
pub struct Reading {
    /// Number of the tick, from 0.
    pub tick: u64,
    /// Where the watch stands after it.
    pub phase: Phase,
    /// Whether the alarm is on.
    pub alarm: bool,
    /// Squared residual, in squared spreads, scaled for gaps.
    pub spe: f64,
    /// The limit it was judged by.
    pub spe_limit: f64,
    /// Hotelling's T2.
    pub t2: f64,
    /// The limit it was judged by.
    pub t2_limit: f64,
    /// Smoothed SPE, in its healthy spreads.
    pub spe_smooth: f64,
    /// Its limit.
    pub spe_smooth_limit: f64,
    /// Smoothed T2, in its healthy spreads.
    pub t2_smooth: f64,
    /// Its limit.
    pub t2_smooth_limit: f64,
    /// Which limits were passed, in the order of [`LIMITS`].
    pub exceeds: [bool; 4],
    /// How much wider the wider of the SPE's and T2's limits is for resting on few rows: 1 or more; NaN as
    /// long as there are none.
    pub widening: f64,
    /// How much of the row was learned.
    pub weight: f64,
    /// Principal axes in use; 0 while settling.
    pub rank: usize,
    /// Movement from the baseline.
    pub drift: Drift,
    /// Squared residual of each channel, scaled as the SPE is: they sum to it.
    pub contributions: Vec<f64>,
    /// What the model makes of the row, in the channels' own units: the value of each channel that the scores stand for,
    /// in its gaps too. NaN for a channel that takes no part. The squared differences from the row, in squared spreads
    /// and over the observed share of the SPE, are the contributions.
    pub expected: Vec<f64>,
    /// What each channel would have to read, in its own unit, for the row to suit the model best if it alone were put
    /// right: see [`super::suspects`]. As `expected` in a gap.
    pub corrected: Vec<f64>,
    /// Reconstruction share of each channel.
    pub shares: Vec<f64>,
    /// Gaps, stuck and vanished channels.
    pub conditions: Vec<Condition>,
}

impl Reading {
    /// An unjudged reading of `channels` channels.
    #[must_use]
    pub fn new(channels: usize) -> Self {
        let mut reading = Self {
            contributions: vec![0.0; channels],
            expected: vec![0.0; channels],
            corrected: vec![0.0; channels],
            shares: vec![0.0; channels],
            conditions: vec![Condition::default(); channels],
            ..Self::default()
        };
        reading.forget_statistics();
        reading
    }

    /// How many channels have no value in this row.
    #[must_use]
    pub fn missing(&self) -> usize {
        self.conditions.iter().filter(|condition| condition.missing).count()
    }

    /// Whether any limit was passed.
    #[must_use]
    pub fn exceeds_any(&self) -> bool {
        self.exceeds.contains(&true)
    }

    /// Sets what a row that is not judged has no value of.
    pub(super) fn forget_statistics(&mut self) {
        (self.spe, self.spe_limit, self.t2, self.t2_limit) = (f64::NAN, f64::NAN, f64::NAN, f64::NAN);
        (self.spe_smooth, self.spe_smooth_limit) = (f64::NAN, f64::NAN);
        (self.t2_smooth, self.t2_smooth_limit) = (f64::NAN, f64::NAN);
        self.widening = f64::NAN;
        self.exceeds = [false; 4];
        self.weight = 0.0;
        self.contributions.fill(f64::NAN);
        self.expected.fill(f64::NAN);
        self.corrected.fill(f64::NAN);
        self.shares.fill(0.0);
    }
}
