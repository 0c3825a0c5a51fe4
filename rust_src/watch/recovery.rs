//! After adopting: limits that find back from what was met meanwhile.
//!
//! Statistics met while a new regime is adopted may be a thousand times the usual; forgotten at a constant rate they leave
//! the limits wide for ten time constants. So once no row is adopted any more, charts learn a second time from nothing
//! ([`super::chart`]), and after a window of rows what they have learned takes the place of what they knew. So does a model of
//! these rows alone, where the one that remembers the past describes them badly ([`super::model`]). Residuals shrink by
//! that, or because the model is still taking up the regime: three windows follow one another, and more until the limits no
//! longer fall. A limit that rests on one window is widened for it.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Shortest window: the moments of fewer rows say little.
const LEAST: u64 = 100;
/// Rows of a window for each direction tracked: a model of fewer fits them too well.
const PER_DIRECTION: u64 = 10;
/// Windows at least: the first still holds what came just after the last row was adopted.
const WINDOWS: u32 = 3;

/// Counts the rows of a window.
#[derive(Clone, Copy, Debug)]
pub struct Recovery {
    window: u64,
    /// Rows to the end of the window; 0 where none is under way.
    left: u64,
    /// Windows that have ended.
    ended: u32,
}

impl Recovery {
    /// None under way; a window has `hold` rows, or as many more as a model of so many `directions` wants.
    #[must_use]
    pub fn new(hold: u64, directions: usize) -> Self {
        Self { window: hold.max(LEAST).max(PER_DIRECTION * directions as u64), left: 0, ended: 0 }
    }

    /// Whether a window is under way.
    #[must_use]
    pub fn active(&self) -> bool {
        self.left > 0
    }

    /// The first window begins, in place of one that may be under way.
    pub fn begin(&mut self) {
        (self.left, self.ended) = (self.window, 0);
    }

    /// A window has ended, with limits that are still `falling` or not: another begins where one is needed.
    pub fn go_on(&mut self, falling: bool) {
        self.ended = self.ended.saturating_add(1);
        if falling || self.ended < WINDOWS {
            self.left = self.window;
        }
    }

    /// A row has been learned; returns whether the window ends with it.
    pub fn take(&mut self) -> bool {
        let was_active = self.active();
        self.left = self.left.saturating_sub(1);
        was_active && self.left == 0
    }
}

impl Part for Recovery {
    fn write(&self, to: &mut Writer) {
        let Self { window: _, left, ended } = self;
        to.word("left", left);
        to.word("ended", ended);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.left = from.counter("left")?.min(self.window);
        self.ended = from.parse("ended")?;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_window_ends_once_and_a_new_beginning_puts_it_off() {
        let mut recovery = Recovery::new(300, 12);
        assert!((0..10).all(|_| !recovery.take()));
        recovery.begin();
        assert!((0..299).all(|_| !recovery.take()));
        recovery.begin();
        assert_eq!((0..600).filter(|_| recovery.take()).count(), 1);
        assert!(!recovery.active());
    }

    #[test]
    fn three_windows_follow_one_another_and_more_while_limits_fall() {
        let mut recovery = Recovery::new(20, 10);
        recovery.begin();
        let mut ends = Vec::new();
        for row in 1..2_000 {
            if recovery.take() {
                ends.push(row);
                recovery.go_on(ends.len() == 3);
            }
        }
        assert_eq!(ends, [100, 200, 300, 400]);
    }
}
