//! On and off: an alarm wants `confirm` of the last `of` rows.
//!
//! One row in a thousand passes a limit by chance, three of five almost never: the alarm costs two rows of delay and
//! buys silence. Off is likewise: `confirm` of the last `of` rows within the limits. The window starts empty after
//! each switch, so that the rows that switched it on do not also keep it on, and it does not flutter.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// The switch and the rows it looks at.
#[derive(Clone, Debug)]
pub struct Alarm {
    confirm: usize,
    window: Vec<bool>,
    next: usize,
    filled: usize,
    on: bool,
}

impl Alarm {
    /// Off, with an empty window.
    #[must_use]
    pub fn new(confirm: usize, of: usize) -> Self {
        Self { confirm, window: vec![false; of], next: 0, filled: 0, on: false }
    }

    /// Takes in whether the newest row exceeds a limit; returns whether the alarm switched.
    pub fn take(&mut self, exceeds: bool) -> bool {
        self.window[self.next] = exceeds;
        self.next = (self.next + 1) % self.window.len();
        self.filled = (self.filled + 1).min(self.window.len());
        let exceeding = self.window[..self.filled].iter().filter(|row| **row).count();
        let agreeing = if self.on { self.filled - exceeding } else { exceeding };
        if agreeing < self.confirm {
            return false;
        }
        self.on = !self.on;
        self.restart();
        true
    }

    /// Whether it is on.
    #[must_use]
    pub fn on(&self) -> bool {
        self.on
    }

    /// Off, with an empty window.
    pub fn reset(&mut self) {
        self.on = false;
        self.restart();
    }

    fn restart(&mut self) {
        self.next = 0;
        self.filled = 0;
    }
}

/// The rows looked at, in their ring, as zeros and ones.
impl Part for Alarm {
    fn write(&self, to: &mut Writer) {
        let Self { confirm: _, window, next, filled, on } = self;
        let rows: Vec<f64> = window.iter().map(|row| f64::from(u8::from(*row))).collect();
        to.numbers("window", &rows);
        to.word("next", next);
        to.word("filled", filled);
        to.word("on", on);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let of = self.window.len();
        self.window = from.numbers("window", of)?.iter().map(|row| *row > 0.0).collect();
        self.next = from.at_most("next", of - 1)?;
        self.filled = from.at_most("filled", of)?;
        self.on = from.parse("on")?;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn run(alarm: &mut Alarm, rows: &str) -> String {
        let state = |on| if on { 'A' } else { '.' };
        rows.chars()
            .map(|row| {
                alarm.take(row == 'x');
                state(alarm.on())
            })
            .collect()
    }

    #[test]
    fn three_of_five_switch_on_and_three_of_five_off() {
        let mut alarm = Alarm::new(3, 5);
        assert_eq!(run(&mut alarm, "x.x..x.xx...xx..."), "........AAA......");
        let mut alarm = Alarm::new(3, 5);
        assert_eq!(run(&mut alarm, "xxx.x.x..xxx"), "..AAAAA....A");
    }

    #[test]
    fn isolated_rows_never_alarm() {
        for pattern in ["x.x..", "xx...", "x...."] {
            assert!(!run(&mut Alarm::new(3, 5), &pattern.repeat(200)).contains('A'), "{pattern}");
        }
    }

    #[test]
    fn one_of_one_follows_each_row() {
        let mut alarm = Alarm::new(1, 1);
        assert_eq!(run(&mut alarm, "x.xx."), "A.AA.");
    }
}
