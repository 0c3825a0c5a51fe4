//! What a tracker is made with.

use crate::error::Error;

/// Guard directions where none are asked for: as many as are reported, but at least this many.
const LEAST_GUARD: usize = 8;

/// What a tracker is made with.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// Entries a row.
    pub channels: usize,
    /// Principal directions reported.
    pub rank: usize,
    /// Time constant of forgetting, in rows: a row keeps the weight `1 - 1/memory` a tick. None forgets nothing.
    pub memory: Option<f64>,
    /// Whether the weighted mean is tracked and taken off.
    pub center: bool,
    /// Directions tracked beyond `rank` and not reported. None: as many again, at least 8.
    pub guard: Option<usize>,
}

impl Settings {
    /// Centred, nothing forgotten, default guard.
    #[must_use]
    pub fn new(channels: usize, rank: usize) -> Self {
        Self { channels, rank, memory: None, center: true, guard: None }
    }

    /// Directions tracked: rank and guard, never more than there are channels.
    #[must_use]
    pub fn directions(&self) -> usize {
        let guard = self.guard.unwrap_or(self.rank.max(LEAST_GUARD));
        self.rank.saturating_add(guard).min(self.channels)
    }

    /// The weight a row keeps over `elapsed` ticks.
    #[must_use]
    pub fn kept(&self, elapsed: f64) -> f64 {
        match self.memory {
            None => 1.0,
            // The usual tick, without the transcendental functions.
            Some(memory) if elapsed.to_bits() == 1f64.to_bits() => 1.0 - memory.recip(),
            Some(memory) => (elapsed * (-memory.recip()).ln_1p()).exp(),
        }
    }

    /// Checks the ranges.
    ///
    /// # Errors
    /// [`Error::Parameter`] naming the first that is out of its range.
    pub fn check(&self) -> Result<(), Error> {
        if self.rank == 0 || self.rank > self.channels {
            return Err(Error::Parameter {
                name: "rank",
                expected: format!("1 to channels = {}", self.channels),
                got: self.rank.to_string(),
            });
        }
        if let Some(guard) = self.guard.filter(|guard| *guard > self.channels - self.rank) {
            return Err(Error::Parameter {
                name: "guard",
                expected: format!("at most channels - rank = {}", self.channels - self.rank),
                got: guard.to_string(),
            });
        }
        match self.memory {
            Some(memory) if !(memory > 1.0 && memory.is_finite()) => Err(Error::Parameter {
                name: "memory",
                expected: "a finite number of rows above 1, or none".into(),
                got: memory.to_string(),
            }),
            _ => Ok(()),
        }
    }
}

/// Checks a weight or a number of ticks.
pub(super) fn check_amount(name: &'static str, value: f64) -> Result<(), Error> {
    if value >= 0.0 && value.is_finite() {
        return Ok(());
    }
    Err(Error::Parameter { name, expected: "a finite number, 0 or more".into(), got: value.to_string() })
}
