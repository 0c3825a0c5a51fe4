//! The monitoring loop: each row is judged by what the healthy rows before it taught, then learned.
//!
//! # A tick
//!
//! 1. The row is scaled by the units of the settling rows ([`units`]) and taken from the running mean.
//! 2. It is judged by principal axes ([`lens`]): SPE off them, Hotelling's T2 on them, and the exponentially weighted
//!    average of each ([`smooth`]), each against a limit that follows its own healthy moments ([`limits`], [`chart`]).
//! 3. `confirm` rows of the last `of` beyond a limit switch the [`alarm`]; the channels to look at first are those whose
//!    correction would take most from the statistics ([`suspects`]).
//! 4. A row within its limits is learned by tracker and limits. A row beyond is not, and nothing is forgotten, until
//!    `hold` of them have come in succession ([`gate`]).
//!
//! Judging comes before learning: a row never softens its own verdict.
//!
//! # What is asked of the false-alarm rate
//!
//! `false_alarm` is the share of healthy rows beyond one limit or another. It is split evenly over the four limits; as
//! they are nearly independent, and each is widened for the few rows it rests on, the rate of rows beyond comes out at
//! what was asked. The alarm itself, which wants a majority of rows, is rarer still where rows are independent.

pub mod alarm;
pub mod allowance;
pub mod chart;
mod cholesky;
pub mod drift;
pub mod event;
pub mod gate;
mod judging;
mod learned;
pub mod lens;
pub mod limits;
mod model;
mod newcomer;
mod partial;
pub mod rank;
mod reading;
mod recovery;
mod renewal;
pub mod replay;
pub mod runs;
mod settings;
mod settle;
pub mod smooth;
mod state;
pub mod suspects;
mod turning;
pub mod units;

use crate::error::Error;
use crate::memory::check_room;
use crate::scalar::Scalar;

use event::{Event, Events};
use judging::Judging;
pub use limits::Limits;
pub use reading::{Condition, LIMITS, Phase, Reading};
use replay::Replay;
use runs::Runs;
pub use settings::{LEAST_SETTLE, Settings};
use settle::Shortage;

/// Where the watch is in its life.
#[derive(Clone)]
enum Stage<T: Scalar> {
    /// The rows so far, at most `settle` of them.
    Settling(Vec<f64>),
    /// Settled.
    Judging(Box<Judging<T>>),
}

/// A monitoring loop over rows of a fixed number of channels.
#[derive(Clone)]
pub struct Watch<T: Scalar> {
    settings: Settings,
    names: Vec<String>,
    stage: Stage<T>,
    runs: Runs,
    events: Events,
    reading: Reading,
    phase: Phase,
    ticks: u64,
    frozen: bool,
}

impl<T: Scalar> Watch<T> {
    /// A watch that has seen nothing. Room for `settle` rows is taken as they come and given back when settling ends.
    ///
    /// # Errors
    /// [`Error::Parameter`] where a setting is out of its range; [`Error::Memory`] where the rows to settle on, or the
    /// window of the alarm, cannot be held.
    pub fn new(settings: Settings) -> Result<Self, Error> {
        settings.check()?;
        check_room(settings.channels, settings.settle)?;
        check_room(settings.of, 1)?;
        let names = (0..settings.channels).map(|channel| format!("channel_{channel}")).collect();
        Self::blank(settings, names)
    }

    /// The same with the names of the channels, each once.
    ///
    /// # Errors
    /// As [`Watch::new`], and [`Error::Parameter`] for the names.
    pub fn with_names(settings: Settings, names: Vec<String>) -> Result<Self, Error> {
        check_names(&names, settings.channels)?;
        Ok(Self { names, ..Self::new(settings)? })
    }

    /// Of settings that have been checked.
    fn blank(settings: Settings, names: Vec<String>) -> Result<Self, Error> {
        let channels = settings.channels;
        check_names(&names, channels)?;
        Ok(Self {
            stage: Stage::Settling(Vec::new()),
            runs: Runs::new(channels),
            events: Events::new(channels),
            reading: Reading::new(channels),
            phase: Phase::Settling,
            ticks: 0,
            frozen: false,
            names,
            settings,
        })
    }

    /// Judges a row, then learns it as far as the gate allows. NaN is a gap. `O(channels (rank + guard))`, no
    /// allocation once settled; the row that ends settling pays for learning all of them.
    ///
    /// # Errors
    /// [`Error::Length`] and [`Error::NonFinite`] (infinity); the watch is as it was.
    pub fn tick(&mut self, row: &[f64]) -> Result<&Reading, Error> {
        self.check(row)?;
        self.reading.tick = self.ticks;
        self.ticks += 1;
        self.runs.take(row, matches!(self.stage, Stage::Settling(_)));
        for (channel, (condition, value)) in self.reading.conditions.iter_mut().zip(row).enumerate() {
            *condition = Condition {
                missing: value.is_nan(),
                stuck: self.runs.stuck(channel),
                vanished: self.runs.vanished(channel),
            };
        }
        match &mut self.stage {
            Stage::Settling(rows) => {
                self.reading.phase = Phase::Settling;
                if !self.frozen {
                    rows.extend_from_slice(row);
                    self.try_to_settle()?;
                }
            }
            Stage::Judging(judging) => {
                judging.tick(row, self.frozen, &mut self.reading, &mut self.events)?;
            }
        }
        self.phase = self.reading.phase;
        Ok(&self.reading)
    }

    /// Many ticks: `rows` is row-major. The readings are those of one tick after another, to the last bit.
    ///
    /// # Errors
    /// Those of [`Watch::tick`], with the row; the watch is as it was.
    pub fn replay(&mut self, rows: &[f64]) -> Result<Replay, Error> {
        self.check_rows(rows)?;
        let channels = self.settings.channels;
        let mut replay = Replay::with_room(rows.len() / channels, channels);
        self.replay_into(rows, &mut replay)?;
        Ok(replay)
    }

    /// The same for rows that have been checked, added to a replay.
    ///
    /// # Errors
    /// Those of [`Watch::tick`] where they have not.
    pub fn replay_into(&mut self, rows: &[f64], replay: &mut Replay) -> Result<(), Error> {
        for row in rows.chunks_exact(self.settings.channels) {
            replay.push(self.tick(row)?);
        }
        Ok(())
    }

    /// Settles on exactly these rows (row-major) in place of the first `settle` of the stream; what was learned before
    /// is let go. They are no ticks.
    ///
    /// # Errors
    /// Those of [`Watch::tick`], with the row; [`Error::Parameter`] where the rows do not do: too few, or fewer than
    /// two channels that move. The watch is as it was.
    pub fn settle_on(&mut self, rows: &[f64]) -> Result<(), Error> {
        self.check_rows(rows)?;
        let settled = settle::settle(rows, &self.settings)?.map_err(|shortage| {
            let count = rows.len() / self.settings.channels;
            Error::Parameter {
                name: "rows to settle on",
                expected: format!(
                    "{LEAST_SETTLE} or more that can be judged, in which two channels or more move"
                ),
                got: match shortage {
                    Shortage::Moving(moving) => format!("{count}, in which {moving} of the channels move"),
                    Shortage::Judged(judged) => format!("{count}, of which {judged} can be judged"),
                },
            }
        })?;
        let judging = Judging::new(&self.settings, settled);
        self.runs = Runs::new(self.settings.channels);
        for row in rows.chunks_exact(self.settings.channels) {
            self.runs.take(row, true);
        }
        self.events.close(self.ticks);
        self.phase = judging.phase();
        self.stage = Stage::Judging(Box::new(judging));
        Ok(())
    }

    /// Settles once enough rows are there. Rows that do not do make room for a quarter of new ones.
    fn try_to_settle(&mut self) -> Result<(), Error> {
        let Stage::Settling(rows) = &mut self.stage else { return Ok(()) };
        let wanted = self.settings.settle * self.settings.channels;
        if rows.len() < wanted {
            return Ok(());
        }
        if let Ok(settled) = settle::settle(rows, &self.settings)? {
            self.stage = Stage::Judging(Box::new(Judging::new(&self.settings, settled)));
        } else {
            rows.drain(..self.settings.settle.div_ceil(4) * self.settings.channels);
        }
        Ok(())
    }

    /// Stops learning until [`Watch::resume`]; judging goes on. A watch that has not settled yet waits meanwhile.
    pub fn freeze(&mut self) {
        self.frozen = true;
    }

    /// Learns again.
    pub fn resume(&mut self) {
        self.frozen = false;
    }

    /// Whether learning is stopped.
    #[must_use]
    pub fn frozen(&self) -> bool {
        self.frozen
    }

    /// Takes the present state as the new baseline; the alarm and its counters start afresh. Said during an alarm, it
    /// also means that what is seen now is healthy: rows beyond a limit are adopted from the next one on, and do not raise
    /// the alarm until `of` rows in a row were within, for three times `hold` rows at most.
    pub fn accept(&mut self) {
        if let Stage::Judging(judging) = &mut self.stage {
            judging.accept(self.ticks, &mut self.events);
            self.phase = judging.phase();
        }
    }

    /// The reading of the last tick.
    #[must_use]
    pub fn reading(&self) -> &Reading {
        &self.reading
    }

    /// Settings it was made with.
    #[must_use]
    pub fn settings(&self) -> &Settings {
        &self.settings
    }

    /// Names of the channels.
    #[must_use]
    pub fn names(&self) -> &[String] {
        &self.names
    }

    /// Where it stands.
    #[must_use]
    pub fn phase(&self) -> Phase {
        self.phase
    }

    /// Principal axes in use; 0 while settling.
    #[must_use]
    pub fn rank(&self) -> usize {
        self.judging().map_or(0, Judging::rank)
    }

    /// Variances along those axes in squared spreads, descending and not below rounding; none while settling. Rows are
    /// judged by them: they lag the rows learned by about a hundredth of the memory.
    #[must_use]
    pub fn energies(&self) -> &[f64] {
        self.judging().map_or(&[], |judging| judging.model().lens.energies())
    }

    /// Settling rows left out as glitches.
    #[must_use]
    pub fn dropped(&self) -> usize {
        self.judging().map_or(0, Judging::dropped)
    }

    /// Ticks so far.
    #[must_use]
    pub fn ticks(&self) -> u64 {
        self.ticks
    }

    /// Whether `channel` takes part: not one that has never moved or had no values; false while settling.
    #[must_use]
    pub fn moves(&self, channel: usize) -> bool {
        self.judging().is_some_and(|judging| judging.model().units.moves(channel))
    }

    /// The latest alarms, oldest first.
    pub fn events(&self) -> impl Iterator<Item = &Event> {
        self.events.iter()
    }

    /// How far the tracked directions are from orthonormal: the spectral norm of `I - Q Q^T`; 0 while settling.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen on finite rows.
    pub fn orthogonality_error(&self) -> Result<f64, Error> {
        self.judging().map_or(Ok(0.0), |judging| judging.model().tracker.orthogonality_error())
    }

    fn judging(&self) -> Option<&Judging<T>> {
        match &self.stage {
            Stage::Settling(_) => None,
            Stage::Judging(judging) => Some(judging),
        }
    }

    fn check(&self, row: &[f64]) -> Result<(), Error> {
        let expected = self.settings.channels;
        if row.len() != expected {
            return Err(Error::Length { what: "row", expected, got: row.len() });
        }
        match row.iter().position(|value| value.is_infinite()) {
            Some(index) => Err(Error::NonFinite { what: "row", index, value: row[index] }),
            None => Ok(()),
        }
    }

    /// Checks all rows that a block call is given, before any of them is worked on.
    ///
    /// # Errors
    /// Those of [`Watch::tick`], with the row.
    pub fn check_rows(&self, rows: &[f64]) -> Result<(), Error> {
        let channels = self.settings.channels;
        if !rows.len().is_multiple_of(channels) {
            return Err(Error::Length {
                what: "rows",
                expected: rows.len().div_ceil(channels) * channels,
                got: rows.len(),
            });
        }
        rows.chunks_exact(channels)
            .enumerate()
            .try_for_each(|(index, row)| self.check(row).map_err(|error| error.in_row(index)))
    }
}

/// Refuses names that are not one a channel, each once.
fn check_names(names: &[String], channels: usize) -> Result<(), Error> {
    let refuse = |expected: String, got: String| Err(Error::Parameter { name: "names", expected, got });
    if names.len() != channels {
        return refuse(channels.to_string(), names.len().to_string());
    }
    let mut sorted: Vec<&String> = names.iter().collect();
    sorted.sort_unstable();
    match sorted.windows(2).find(|pair| pair[0] == pair[1]) {
        Some(pair) => refuse("each once".into(), format!("{} twice", pair[0])),
        None => Ok(()),
    }
}
