//! How many rows beyond a limit the limits may learn from.
//!
//! A row beyond a limit by chance belongs to the healthy ones: were it left out, each limit would rest on rows that its
//! predecessor let through, and shrink. A fault that comes and goes is beyond in one row of ten or thirty, too seldom
//! for the alarm; were all those rows counted, they would lift the limit until none is beyond and the fault is
//! learned. What tells the two apart is how often they come: chance gives `false_alarm` of all rows. So rows beyond count
//! as long as they come no oftener than a few times that, with some to spare for the bursts that correlated rows make.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Rows beyond that count in moments, in shares of what was asked for: heavy tails and correlation of healthy rows give up
/// to three times that.
const OFTENER: f64 = 2.5;
/// Rows that may count in one burst: a smoothed statistic beyond its limit stays there for about ten.
const BURST: f64 = 12.0;
/// Values beyond that are counted for a quantile, in shares of what lies beyond it by chance. A quantile goes where the
/// count is: with much more than 1 it would be led to the fault, with less it could not rise.
const COUNTED: f64 = 1.5;
/// Values beyond that are counted for a quantile in one burst.
const COUNTED_BURST: f64 = 2.0;

/// A purse that fills as rows are judged and that rows beyond a limit draw on.
#[derive(Clone, Copy, Debug)]
pub struct Allowance {
    rate: f64,
    most: f64,
    left: f64,
}

impl Allowance {
    /// Full, for moments of rows of which the share `false_alarm` is beyond one limit or another by chance.
    #[must_use]
    pub fn of_rows(false_alarm: f64) -> Self {
        Self { rate: OFTENER * false_alarm, most: BURST, left: BURST }
    }

    /// Full, for a quantile that values pass with probability `tail`.
    #[must_use]
    pub fn of_quantile(tail: f64) -> Self {
        Self { rate: COUNTED * tail, most: COUNTED_BURST, left: COUNTED_BURST }
    }

    /// Takes in whether the newest row is beyond a limit; returns whether the limits may learn from it.
    pub fn take(&mut self, exceeds: bool) -> bool {
        self.left = (self.left + self.rate).min(self.most);
        if !exceeds {
            return true;
        }
        let granted = self.left >= 1.0;
        if granted {
            self.left -= 1.0;
        }
        granted
    }
}

impl Part for Allowance {
    fn write(&self, to: &mut Writer) {
        let Self { rate: _, most: _, left } = self;
        to.number("left", *left);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.left = from.amount("left")?.min(self.most);
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rows_beyond_count_while_they_come_as_often_as_chance_brings_them() {
        let mut allowance = Allowance::of_rows(1e-2);
        let granted = |allowance: &mut Allowance, every: u32| {
            (0..10_000)
                .filter(|row| {
                    row % every == 0 && allowance.take(true) || row % every != 0 && !allowance.take(false)
                })
                .count()
        };
        assert_eq!(granted(&mut allowance, 100), 100);
        assert_eq!(granted(&mut allowance, 50), 200);
        let often = granted(&mut allowance, 5);
        assert!((250..=262).contains(&often), "{often}");
    }
}
