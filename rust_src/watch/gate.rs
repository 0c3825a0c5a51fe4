//! What may be learned.
//!
//! A row beyond a limit is not learned and nothing is forgotten. That alone locks up: after a change of regime every
//! row is beyond, the model never moves, and a limit that follows only the rows it let through shrinks. So the
//! gate counts the rows beyond; after `hold` of them it lets them in again with bounded influence, weight
//! limit/statistic, until rows stay within the limits of themselves.
//!
//! The count is of rows beyond in succession, and a succession ends with `of` rows within in a row: a new regime
//! that shows beyond the limits nine times in ten must be adopted too. How the limits find back from it is
//! [`super::recovery`]'s.
//!
//! Somebody may say that what is seen now is healthy. Rows beyond are then adopted from the next one on, and do not
//! count for the alarm until `of` rows in a row were within, or for three times `hold` rows at most.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// How long, in `hold`s, rows beyond are forgiven at most once somebody has said that they are healthy.
const FORGIVEN: u64 = 3;

/// Counts rows beyond the limits.
#[derive(Clone, Debug)]
pub struct Gate {
    hold: u64,
    calm_needed: u64,
    beyond: u64,
    calm: u64,
    /// Rows for which those beyond do not count for the alarm.
    forgiven: u64,
}

impl Gate {
    /// Opens after `hold` rows beyond; `of` rows within end a succession.
    #[must_use]
    pub fn new(hold: u64, of: u64) -> Self {
        Self { hold, calm_needed: of, beyond: 0, calm: 0, forgiven: 0 }
    }

    /// Takes in whether the newest row exceeds a limit; returns whether it is to be adopted.
    pub fn take(&mut self, exceeds: bool) -> bool {
        self.forgiven = self.forgiven.saturating_sub(1);
        if exceeds {
            self.beyond = (self.beyond + 1).min(self.hold.saturating_add(1));
            self.calm = 0;
        } else {
            self.calm = (self.calm + 1).min(self.calm_needed);
            if self.calm == self.calm_needed {
                self.beyond = 0;
                self.forgiven = 0;
            }
        }
        exceeds && self.beyond > self.hold
    }

    /// Lets rows beyond in from the next one on: somebody has said that they are healthy.
    pub fn open(&mut self) {
        self.beyond = self.hold;
        self.forgiven = self.hold.saturating_mul(FORGIVEN);
    }

    /// Whether rows beyond do not count for the alarm.
    #[must_use]
    pub fn forgiving(&self) -> bool {
        self.forgiven > 0
    }

    /// Starts counting afresh.
    pub fn reset(&mut self) {
        self.beyond = 0;
        self.calm = 0;
        self.forgiven = 0;
    }
}

impl Part for Gate {
    fn write(&self, to: &mut Writer) {
        let Self { hold: _, calm_needed: _, beyond, calm, forgiven } = self;
        to.word("beyond", beyond);
        to.word("calm", calm);
        to.word("forgiven", forgiven);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.beyond = from.counter("beyond")?.min(self.hold.saturating_add(1));
        self.calm = from.counter("calm")?.min(self.calm_needed);
        self.forgiven = from.counter("forgiven")?;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nothing_is_adopted_before_hold_rows_in_succession() {
        let mut gate = Gate::new(20, 5);
        assert!((0..20).all(|_| !gate.take(true)));
        assert!(gate.take(true));
    }

    #[test]
    fn a_regime_nine_tenths_beyond_is_adopted_too() {
        let mut gate = Gate::new(20, 5);
        assert!((0..40).any(|row| gate.take(row % 10 != 0)));
    }

    #[test]
    fn rows_within_end_a_succession() {
        let mut gate = Gate::new(20, 5);
        for _ in 0..50 {
            assert!((0..19).all(|_| !gate.take(true)));
            assert!((0..5).all(|_| !gate.take(false)));
        }
    }

    #[test]
    fn opened_by_hand_it_adopts_the_next_row_beyond() {
        let mut gate = Gate::new(300, 5);
        gate.open();
        assert!(!gate.take(false));
        assert!(gate.take(true) && gate.forgiving());
    }

    #[test]
    fn what_was_accepted_is_forgiven_until_rows_are_within_and_not_for_ever() {
        let mut gate = Gate::new(300, 5);
        gate.open();
        assert!((0..100).all(|_| gate.take(true) && gate.forgiving()));
        assert!((0..5).all(|_| !gate.take(false)));
        assert!(!gate.forgiving());
        gate.open();
        (0..900).for_each(|_| assert!(gate.take(true)));
        assert!(!gate.forgiving());
    }
}
