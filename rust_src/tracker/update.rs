//! Learning a row.

use super::Tracker;
use super::settings::check_amount;
use crate::basis::{Measured, clean};
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// What became of a row.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Update {
    /// Why it was not learned; None: it was.
    pub skipped: Option<Skipped>,
    /// Channels it lacks.
    pub missing: usize,
}

/// Why a row was not learned.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Skipped {
    /// Fewer channels observed than the rank, or too few to tell the directions apart.
    Gaps,
    /// Its weight is zero.
    Weight,
}

impl Update {
    /// Whether the row was learned.
    #[must_use]
    pub fn learned(&self) -> bool {
        self.skipped.is_none()
    }
}

/// Room for a tick.
#[derive(Clone, Debug)]
pub(super) struct Room {
    /// The row less the mean, scaled by its weight.
    pub d: Vec<f64>,
    /// What the tracked directions do not explain of it.
    w: Vec<f64>,
    /// The direction of that.
    fresh: Vec<f64>,
    h: Vec<f64>,
    s: Vec<f64>,
    correction: Vec<f64>,
    reflector: Vec<f64>,
}

impl Room {
    pub fn new(channels: usize, limit: usize) -> Self {
        Self {
            d: vec![0.0; channels],
            w: vec![0.0; channels],
            fresh: vec![0.0; channels],
            h: Vec::with_capacity(limit + 1),
            s: Vec::with_capacity(limit + 1),
            correction: Vec::with_capacity(limit + 1),
            reflector: Vec::with_capacity(limit + 1),
        }
    }
}

impl<T: Scalar> Tracker<T> {
    /// Learns one row, one tick after the last; NaN is a gap. `12 k channels` flops and no allocation, `k` being the
    /// tracked directions. A weight of zero learns nothing and forgets nothing.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`] for an infinity, [`Error::Parameter`] for a weight that is negative or not
    /// finite.
    pub fn update(&mut self, row: &[f64], weight: f64) -> Result<Update, Error> {
        self.update_after(row, weight, 1.0)
    }

    /// Learns one row, `elapsed` ticks after the last: what was learned before decays by that many.
    ///
    /// # Errors
    /// As [`Tracker::update`]; [`Error::Parameter`] for `elapsed` negative or not finite.
    pub fn update_after(&mut self, row: &[f64], weight: f64, elapsed: f64) -> Result<Update, Error> {
        check_amount("weight", weight)?;
        check_amount("elapsed", elapsed)?;
        let missing = self.check(row)?;
        if weight == 0.0 {
            return Ok(Update { skipped: Some(Skipped::Weight), missing });
        }
        if !self.take_deviation(row, missing)? {
            self.skipped += 1;
            return Ok(Update { skipped: Some(Skipped::Gaps), missing });
        }
        self.decay(elapsed);
        let before = self.weight;
        self.weight = before + weight;
        // The scatter about the new mean gains lambda w weight / (lambda w + weight) d d^T; without a mean, weight d d^T.
        let share = if self.settings.center { before * (weight / self.weight) } else { weight };
        if self.settings.center {
            let step = weight / self.weight;
            self.mean.iter_mut().zip(&self.room.d).for_each(|(mean, d)| *mean += step * d);
        }
        let scale = share.sqrt();
        self.room.d.iter_mut().for_each(|d| *d *= scale);
        self.absorb();
        self.samples += 1;
        self.principal.learned(weight);
        Ok(Update { skipped: None, missing })
    }

    /// Learns rows, one after another in `rows`, one tick each.
    ///
    /// # Errors
    /// As [`Tracker::update`], naming the row, before anything is learned.
    pub fn update_rows(&mut self, rows: &[f64]) -> Result<(), Error> {
        self.check_rows(rows)?;
        for row in rows.chunks_exact(self.settings.channels) {
            self.update(row, 1.0)?;
        }
        Ok(())
    }

    /// Checks rows, one after another in `rows`, as [`Tracker::update`] would check each.
    ///
    /// # Errors
    /// Of the first row that would be refused, naming it.
    pub fn check_rows(&self, rows: &[f64]) -> Result<(), Error> {
        let channels = self.settings.channels;
        if !rows.len().is_multiple_of(channels) {
            return Err(Error::Length { what: "row", expected: channels, got: rows.len() });
        }
        for (index, row) in rows.chunks_exact(channels).enumerate() {
            self.check(row).map_err(|error| error.in_row(index))?;
        }
        Ok(())
    }

    /// Refuses a row of the wrong length or with an infinity; counts its gaps.
    pub(super) fn check(&self, row: &[f64]) -> Result<usize, Error> {
        if row.len() != self.settings.channels {
            return Err(Error::Length { what: "row", expected: self.settings.channels, got: row.len() });
        }
        let mut missing = 0;
        for (index, &value) in row.iter().enumerate() {
            if value.is_infinite() {
                return Err(Error::NonFinite { what: "row", index, value });
            }
            missing += usize::from(value.is_nan());
        }
        Ok(missing)
    }

    /// Leaves the row less the mean in the room, the model's own value in its gaps. A channel seen for the first time
    /// sets its own mean: it starts without a jump. False where too little is observed.
    fn take_deviation(&mut self, row: &[f64], missing: usize) -> Result<bool, Error> {
        let observed = self.settings.channels - missing;
        if observed < self.settings.rank {
            return Ok(false);
        }
        if missing > 0 && self.gaps_need_axes() {
            self.refresh()?;
        }
        if self.settings.center && self.samples_unseen(row) {
            for ((mean, seen), &value) in self.mean.iter_mut().zip(&mut self.seen).zip(row) {
                if !*seen && !value.is_nan() {
                    *mean = value;
                    *seen = true;
                }
            }
        }
        for ((d, mean), value) in self.room.d.iter_mut().zip(&self.mean).zip(row) {
            *d = value - mean;
        }
        Ok(missing == 0 || self.gaps.fill(&mut self.room.d, self.principal.axes()))
    }

    /// Whether a channel of the row is observed for the first time.
    fn samples_unseen(&self, row: &[f64]) -> bool {
        self.seen.iter().zip(row).any(|(seen, value)| !seen && !value.is_nan())
    }

    /// Lets `elapsed` ticks pass.
    pub(super) fn decay(&mut self, elapsed: f64) {
        let kept = self.settings.kept(elapsed);
        self.clock += elapsed;
        if kept < 1.0 {
            self.weight *= kept;
            self.lost *= kept;
            self.factor.decay(kept.sqrt());
        }
    }

    /// Adds the square of the scaled row in the room to the scatter.
    pub(super) fn absorb(&mut self) {
        let size = self.factor.size();
        let room = &mut self.room;
        for buffer in [&mut room.h, &mut room.s, &mut room.correction] {
            buffer.resize(size, 0.0);
        }
        let q = self.q.view(size);
        let squares = ops::project(q, &room.d, &mut room.h);
        if squares == 0.0 {
            return;
        }
        let floor = self.settings.channels as f64 * T::EPSILON * squares.sqrt();
        let squares = ops::subtract_measured(q, &room.h, &room.d, &mut room.w, &mut room.s);
        let measured = Measured { squares, s: &mut room.s, correction: &mut room.correction };
        let cleaned = clean(q, &mut room.w, measured, &mut room.h, floor);
        let norm = cleaned.norm;
        if norm <= floor || size == self.settings.channels {
            self.factor.append(&mut room.h);
            return;
        }
        room.h.push(norm);
        self.factor.border(&mut room.h);
        if size < self.q.rows() {
            ops::normalize_into(norm, &room.w, self.q.row_mut(size));
        } else {
            ops::normalize_into(norm, &room.w, &mut room.fresh);
            self.give_up();
        }
        self.mender.take_turn(&mut self.q, self.factor.size());
    }

    /// Gives up the direction that loses the least of the bordered factor.
    fn give_up(&mut self) {
        let size = self.factor.size();
        self.smallest.find(&self.factor);
        let z = self.smallest.direction(size);
        let room = &mut self.room;
        // |R z|^2 is what the scatter loses; s is free now.
        room.s.resize(size, 0.0);
        self.factor.apply(z, &mut room.s);
        self.lost += room.s.iter().map(|x| x * x).sum::<f64>();
        // H = I - 2 u u^T sends z to the last unit vector, up to sign; the sign that cancels nothing.
        room.reflector.clear();
        room.reflector.extend_from_slice(z);
        let last = &mut room.reflector[size - 1];
        *last += 1f64.copysign(*last);
        let norm = room.reflector.iter().map(|u| u * u).sum::<f64>().sqrt();
        room.reflector.iter_mut().for_each(|u| *u /= norm);
        let (rows, stride) = self.q.parts_mut();
        ops::reflect(rows, stride, size - 1, &room.reflector, &room.fresh);
        self.factor.cut(&room.reflector);
    }
}
