//! Alarms, from on to off, in a bounded list.

use crate::error::Error;
use crate::state::{Part, Reader, Writer};
use std::collections::VecDeque;

use super::suspects::three_foremost;

/// Alarms kept; older ones are let go.
pub const KEPT: usize = 256;

/// One alarm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Event {
    /// The tick that switched it on.
    pub start: u64,
    /// The tick that switched it off; None while it lasts.
    pub end: Option<u64>,
    /// The tick at which a statistic stood farthest beyond its limit.
    pub peak: u64,
    /// That statistic over its limit.
    pub peak_ratio: f64,
    /// Which limits were passed in the course of it: SPE, T2, smoothed SPE, smoothed T2.
    pub exceeds: [bool; 4],
    /// The channels with the largest shares over its rows beyond a limit, largest first; a share of zero is no suspect.
    pub suspects: [(usize, f64); 3],
}

/// The latest alarms, and what the open one has seen.
#[derive(Clone, Debug)]
pub struct Events {
    list: VecDeque<Event>,
    shares: Vec<f64>,
    rows: f64,
}

impl Events {
    /// None yet.
    #[must_use]
    pub fn new(channels: usize) -> Self {
        Self { list: VecDeque::with_capacity(KEPT), shares: vec![0.0; channels], rows: 0.0 }
    }

    /// An alarm begins at `tick`.
    pub fn open(&mut self, tick: u64) {
        if self.list.len() == KEPT {
            self.list.pop_front();
        }
        self.shares.fill(0.0);
        self.rows = 0.0;
        self.list.push_back(Event {
            start: tick,
            end: None,
            peak: tick,
            peak_ratio: 0.0,
            exceeds: [false; 4],
            suspects: [(0, 0.0); 3],
        });
    }

    /// Adds a row beyond a limit to the open alarm, if there is one: how far beyond (statistic over limit), which
    /// limits, the shares of its channels.
    pub fn add(&mut self, tick: u64, ratio: f64, exceeds: [bool; 4], shares: &[f64]) {
        let Some(event) = self.list.back_mut().filter(|event| event.end.is_none()) else { return };
        for (passed, now) in event.exceeds.iter_mut().zip(exceeds) {
            *passed |= now;
        }
        if ratio > event.peak_ratio {
            (event.peak, event.peak_ratio) = (tick, ratio);
        }
        self.rows += 1.0;
        for (mean, share) in self.shares.iter_mut().zip(shares) {
            *mean += (share - *mean) / self.rows;
        }
        three_foremost(&self.shares, &mut event.suspects);
    }

    /// The open alarm ends at `tick`.
    pub fn close(&mut self, tick: u64) {
        if let Some(event) = self.list.back_mut().filter(|event| event.end.is_none()) {
            event.end = Some(tick);
        }
    }

    /// Oldest first.
    pub fn iter(&self) -> impl Iterator<Item = &Event> {
        self.list.iter()
    }
}

/// Numbers of an event in its row: start, end, peak, ratio, four limits, three suspects with their shares.
const COLUMNS: usize = 14;

/// A row an event; no end while it lasts.
impl Part for Events {
    fn write(&self, to: &mut Writer) {
        let Self { list, shares, rows } = self;
        let mut table = Vec::with_capacity(COLUMNS * list.len());
        for event in list {
            let Event { start, end, peak, peak_ratio, exceeds, suspects } = *event;
            table.extend([start as f64, end.map_or(f64::NAN, |end| end as f64), peak as f64, peak_ratio]);
            table.extend(exceeds.map(|passed| f64::from(u8::from(passed))));
            table.extend(suspects.iter().flat_map(|(channel, share)| [*channel as f64, *share]));
        }
        to.table("events", COLUMNS, &table);
        to.numbers("shares", shares);
        to.number("rows", *rows);
    }

    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "as saturates, NaN is 0")]
    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let channels = self.shares.len();
        let table = from.table("events", COLUMNS, KEPT)?;
        self.list.clear();
        for row in table.chunks_exact(COLUMNS) {
            let suspect = |place: usize| (row[8 + 2 * place] as usize, row[9 + 2 * place]);
            let event = Event {
                start: row[0] as u64,
                end: (!row[1].is_nan()).then_some(row[1] as u64),
                peak: row[2] as u64,
                peak_ratio: row[3],
                exceeds: std::array::from_fn(|limit| row[4 + limit] > 0.0),
                suspects: std::array::from_fn(suspect),
            };
            let known = event.suspects.iter().all(|(channel, share)| *channel < channels && !share.is_nan());
            if event.peak_ratio.is_nan() || !known {
                return Err(from.unlike("events", "a peak, and suspects among the channels", "others"));
            }
            self.list.push_back(event);
        }
        self.shares = from.numbers("shares", channels)?;
        self.rows = from.amount("rows")?;
        Ok(())
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
mod tests {
    use super::*;

    #[test]
    fn an_alarm_remembers_its_peak_and_its_suspects() {
        let mut events = Events::new(3);
        events.add(1, 9.0, [true; 4], &[1.0, 0.0, 0.0]);
        events.open(5);
        events.add(5, 1.5, [true, false, false, false], &[0.2, 0.5, 0.0]);
        events.add(6, 4.0, [false, true, false, false], &[0.1, 0.7, 0.0]);
        events.close(9);
        events.add(10, 99.0, [true; 4], &[1.0, 0.0, 0.0]);
        let event = *events.iter().next().unwrap();
        assert_eq!((event.start, event.end, event.peak), (5, Some(9), 6));
        assert_eq!(event.exceeds, [true, true, false, false]);
        assert_eq!(event.suspects[0].0, 1);
        assert!((event.suspects[0].1 - 0.6).abs() < 1e-15);
    }

    #[test]
    fn the_list_is_bounded() {
        let mut events = Events::new(1);
        for tick in 0..1000 {
            events.open(tick);
            events.close(tick);
        }
        assert_eq!(events.iter().count(), KEPT);
        assert_eq!(events.iter().last().unwrap().start, 999);
    }
}
