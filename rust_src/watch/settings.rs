//! What a watch is made with.

use crate::error::Error;

use super::limits::Limits;

/// Fewest rows to settle on: below this, five folds leave too few rows to judge by.
pub const LEAST_SETTLE: usize = 20;

/// Least rate that can be asked for: one row in thirty years of a row a second. Far below, quantiles have no digits left.
const RAREST: f64 = 1e-9;

/// What a watch is made with.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// Entries a row, at least 2.
    pub channels: usize,
    /// Principal axes, below `channels`. None: chosen when settling ends.
    pub rank: Option<usize>,
    /// Rows after which a healthy row's weight has fallen to 1/e. None forgets nothing.
    pub memory: Option<f64>,
    /// Rows to settle on.
    pub settle: usize,
    /// Share of healthy rows that may exceed one limit or another by chance.
    pub false_alarm: f64,
    /// Exceeding rows of the last `of` that switch the alarm on; likewise off.
    pub confirm: usize,
    /// See `confirm`.
    pub of: usize,
    /// Rows beyond a limit after which the watch adopts what it sees.
    pub hold: u64,
    /// Where limits come from.
    pub limits: Limits,
}

impl Settings {
    /// The defaults.
    ///
    /// * `memory` 5000 and `settle` 500: ten times as long to forget as to learn, so that wear over weeks is followed and
    ///   a fault of hours is not; 500 rows give moments with a few per cent of error.
    /// * `false_alarm` 1e-3: a row in a thousand.
    /// * `confirm` 3 `of` 5: a majority of a short window. A single glitch, and a pair, stay silent; a lasting fault
    ///   costs two rows of delay.
    /// * `hold` 300: long beside any alarm window, so that somebody can act before the watch gives in, and short beside
    ///   `memory`, so that a new regime is taken up in a fraction of it.
    #[must_use]
    pub fn new(channels: usize) -> Self {
        Self {
            channels,
            rank: None,
            memory: Some(5_000.0),
            settle: 500,
            false_alarm: 1e-3,
            confirm: 3,
            of: 5,
            hold: 300,
            limits: Limits::Moments,
        }
    }

    /// Weight a row keeps at each healthy row after it.
    #[must_use]
    pub fn keep(&self) -> f64 {
        self.memory.map_or(1.0, |memory| 1.0 - memory.recip())
    }

    /// Weight a row keeps while limits are to forget quickly.
    #[must_use]
    pub fn hasty_keep(&self) -> f64 {
        // At least a few rows, or the variance would be that of one.
        self.keep().min(1.0 - (self.hold.max(20) as f64).recip())
    }

    /// Probability beyond each of the four limits (SPE, T2, and both smoothed), so that a healthy row passes any of them
    /// with probability `false_alarm` at most.
    #[must_use]
    pub fn tail(&self) -> f64 {
        self.false_alarm / 4.0
    }

    /// Checks the ranges.
    ///
    /// # Errors
    /// [`Error::Parameter`] naming the first that is out of its range.
    pub fn check(&self) -> Result<(), Error> {
        let refuse = |name, expected: String, got: String| Err(Error::Parameter { name, expected, got });
        if self.channels < 2 {
            let expected = "2 or more: what the others say of a channel is what it is judged by";
            return refuse("channels", expected.into(), self.channels.to_string());
        }
        if let Some(rank) = self.rank.filter(|rank| !(1..self.channels).contains(rank)) {
            let most = self.channels - 1;
            let expected = format!("1 to channels - 1 = {most}: as many axes as channels leave no residual");
            return refuse("rank", expected, rank.to_string());
        }
        if let Some(memory) = self.memory.filter(|memory| !(*memory >= 2.0 && memory.is_finite())) {
            return refuse("memory", "2 rows or more, or none".into(), memory.to_string());
        }
        if self.settle < LEAST_SETTLE {
            return refuse("settle", format!("{LEAST_SETTLE} rows or more"), self.settle.to_string());
        }
        if !(RAREST..=0.2).contains(&self.false_alarm) {
            return refuse("false_alarm", "1e-9 to 0.2".into(), format!("{:e}", self.false_alarm));
        }
        if self.confirm == 0 || self.confirm > self.of {
            return refuse("confirm", format!("1 to of = {}", self.of), self.confirm.to_string());
        }
        if self.hold == 0 {
            return refuse("hold", "1 row or more".into(), "0".into());
        }
        Ok(())
    }
}
