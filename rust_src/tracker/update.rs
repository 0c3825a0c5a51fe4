//! Learning one row.

use super::Tracker;
use super::mean::Gain;
use super::settings::check_amount;
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// Rounding of a row and its projection, in units of eps, that a direction may consist of.
const ROUNDING: f64 = 4.0;

/// Why a row was not learned.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Skipped {
    /// Its weight is zero.
    Weight,
    /// Fewer channels were observed than axes are reported.
    Gaps,
}

/// What became of a row.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Update {
    /// Why it was not learned; None where it was.
    pub skipped: Option<Skipped>,
    /// Channels that were missing.
    pub missing: usize,
}

impl Update {
    /// Whether the row was learned.
    #[must_use]
    pub fn learned(&self) -> bool {
        self.skipped.is_none()
    }
}

impl<T: Scalar> Tracker<T> {
    /// Learns `row` with `weight`, one tick after the row before. NaN is a gap and is filled with the model's
    /// value. A weight of 0, or too few observed channels, learns nothing and forgets nothing.
    ///
    /// About `11 channels (rank + guard)` flops in three sweeps and `(rank + guard)^3 / 3` on the small factor; gaps
    /// add one sweep and `O((rank + guard)^2 (rank + guard + gaps))`. Nothing is allocated.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`] for an infinite entry, [`Error::Overflow`] where the squares of the row
    /// exceed the largest number, [`Error::Parameter`] for the weight. The tracker is then as it was.
    pub fn update(&mut self, row: &[f64], weight: f64) -> Result<Update, Error> {
        self.update_after(row, weight, 1.0)
    }

    /// As [`Self::update`], `elapsed` ticks after the row before: 200 forget as 200 ticks do.
    ///
    /// # Errors
    /// As [`Self::update`], and [`Error::Parameter`] for `elapsed`.
    pub fn update_after(&mut self, row: &[f64], weight: f64, elapsed: f64) -> Result<Update, Error> {
        check_amount("weight", weight)?;
        check_amount("elapsed", elapsed)?;
        self.subtract_mean(row)?;
        let missing = self.gaps.missing().len();
        let skipped = if weight == 0.0 {
            Some(Skipped::Weight)
        } else if row.len() - missing < self.settings.rank {
            self.skipped += 1;
            Some(Skipped::Gaps)
        } else {
            None
        };
        if skipped.is_some() {
            return Ok(Update { skipped, missing });
        }
        if missing > 0 {
            self.fill_gaps(self.row_norm(row));
        }
        let kept = self.settings.kept(elapsed);
        let gain = Gain::new(kept, weight);
        self.mean.scale(gain, &self.delta, &mut self.scaled);
        let total = self.mean.total() * kept + weight;
        if !total.is_finite() {
            return Err(Error::Overflow { what: "total weight" });
        }
        let squares = ops::norm_squared(&self.scaled);
        let held = self.subspace.factor().energy() + self.subspace.lost();
        // Neither the sum of squares nor the variance, which a small weight makes larger, may leave the numbers.
        if !(squares + held).is_finite() || !((squares + kept * held) / total).is_finite() {
            return Err(Error::Overflow { what: "squared row" });
        }
        self.mean.advance(gain, &self.delta, self.gaps.missing());
        self.subspace.decay(kept);
        // An entry is known to half an eps of itself; a direction made of that is none.
        let rounding = f64::EPSILON * weight.sqrt() * self.row_norm(row);
        self.subspace.absorb(&self.scaled, rounding);
        self.samples += 1;
        self.clock += elapsed;
        self.principal.outdate();
        Ok(Update { skipped: None, missing })
    }

    /// Checks rows, one after another in `rows`, for a wrong length or an infinity.
    ///
    /// # Errors
    /// Of the first row that would be refused, naming it.
    pub fn check_rows(&self, rows: &[f64]) -> Result<(), Error> {
        let channels = self.settings.channels;
        if !rows.len().is_multiple_of(channels) {
            return Err(Error::Length { what: "row", expected: channels, got: rows.len() });
        }
        let Some(place) = rows.iter().position(|value| value.is_infinite()) else { return Ok(()) };
        let error = Error::NonFinite { what: "row", index: place % channels, value: rows[place] };
        Err(error.in_row(place / channels))
    }

    /// Leaves `row - mean` in `delta`, zeros in its gaps, and the gaps noted.
    pub(super) fn subtract_mean(&mut self, row: &[f64]) -> Result<(), Error> {
        if row.len() != self.settings.channels {
            return Err(Error::Length { what: "row", expected: self.settings.channels, got: row.len() });
        }
        self.mean.delta(row, &mut self.delta);
        self.gaps.clear();
        // Finite where every entry is, unless the squares overflow; then the entries are looked at.
        if ops::norm_squared(&self.delta).is_finite() {
            return Ok(());
        }
        self.gaps.find(row).map_err(|index| Error::NonFinite { what: "row", index, value: row[index] })?;
        for &channel in self.gaps.missing() {
            self.delta[channel] = 0.0;
        }
        if self.delta.iter().all(|entry| entry.is_finite()) {
            return Ok(());
        }
        Err(Error::Overflow { what: "row less the mean" })
    }

    /// Fills the gaps of `delta` with the model's values; `size` is the norm of the row.
    fn fill_gaps(&mut self, size: f64) {
        let count = self.subspace.count();
        let spare = self.settings.channels - count;
        let h = &mut self.coefficients[..count];
        let squares = ops::project(self.subspace.basis(), &self.delta, h);
        // Noise a direction: what truncation gave up, and the rounding that made directions of its own.
        let given_up = if spare == 0 { 0.0 } else { self.subspace.lost() / spare as f64 };
        let rounding = (ROUNDING * f64::EPSILON * size).powi(2) + (ROUNDING * T::EPSILON).powi(2) * squares;
        self.gaps.fill(&self.subspace, given_up + self.mean.total() * rounding, h, &mut self.delta);
    }

    /// Norm of the observed part of `row`.
    fn row_norm(&self, row: &[f64]) -> f64 {
        if self.gaps.missing().is_empty() {
            return ops::norm_squared(row).sqrt();
        }
        row.iter().filter(|value| !value.is_nan()).map(|value| value * value).sum::<f64>().sqrt()
    }
}
