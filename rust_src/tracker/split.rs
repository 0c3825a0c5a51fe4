//! A row against the model as it stands, without learning.

use super::Tracker;
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// What a split found, beside coefficients and residual.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Split {
    /// Squared norm of the residual over the observed channels, times channels / observed; squared unit of the rows.
    pub residual_norm_squared: f64,
    /// Channels that were missing.
    pub missing: usize,
    /// Whether the observed channels determine every coefficient.
    pub determined: bool,
}

impl<T: Scalar> Tracker<T> {
    /// Splits `row - mean` into coefficients on the principal axes (`rank` of them; 0 past the axes that exist) and a
    /// residual (`channels` entries, 0 in gaps), after a refresh. Two sweeps over the axes, `4 rank channels` flops.
    ///
    /// With gaps the coefficients are those of the least-squares fit to the observed channels; ones that these do not
    /// determine are 0.
    ///
    /// # Errors
    /// As [`Self::refresh`] and [`Self::split_as_refreshed_into`].
    pub fn split_into(
        &mut self,
        row: &[f64],
        coefficients: &mut [f64],
        residual: &mut [f64],
    ) -> Result<Split, Error> {
        // Looked at before the axes are, which are left as they were for a row that is refused.
        self.check_split(row, coefficients, residual)?;
        self.refresh()?;
        self.split_delta(coefficients, residual)
    }

    /// As [`Self::split_into`], with the axes of the last refresh and the mean as it stands.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`] for an infinite entry, [`Error::Overflow`].
    pub fn split_as_refreshed_into(
        &mut self,
        row: &[f64],
        coefficients: &mut [f64],
        residual: &mut [f64],
    ) -> Result<Split, Error> {
        self.check_split(row, coefficients, residual)?;
        self.split_delta(coefficients, residual)
    }

    /// Refuses lengths and entries, or leaves the row less the mean in `delta`.
    fn check_split(&mut self, row: &[f64], coefficients: &[f64], residual: &[f64]) -> Result<(), Error> {
        let (channels, rank) = (self.settings.channels, self.settings.rank);
        if coefficients.len() != rank {
            return Err(Error::Length { what: "coefficients", expected: rank, got: coefficients.len() });
        }
        if residual.len() != channels {
            return Err(Error::Length { what: "residual", expected: channels, got: residual.len() });
        }
        self.subtract_mean(row)
    }

    /// Splits `delta`.
    fn split_delta(&mut self, coefficients: &mut [f64], residual: &mut [f64]) -> Result<Split, Error> {
        let channels = self.settings.channels;
        let axes = self.principal.found();
        let (c, none) = coefficients.split_at_mut(axes.count());
        none.fill(0.0);
        ops::project(axes, &self.delta, c);
        let missing = self.gaps.missing().len();
        let determined = missing == 0 || self.gaps.fit(axes, c);
        let mut squares = ops::subtract(axes, c, &self.delta, residual);
        if missing == 0 && T::EPSILON > f64::EPSILON {
            // Axes rounded to the stored type are orthonormal to its eps only: one correction makes up for it.
            let more = &mut self.coefficients[..axes.count()];
            ops::project(axes, residual, more);
            for (sum, more) in c.iter_mut().zip(&*more) {
                *sum += more;
            }
            squares = ops::subtract(axes, c, &self.delta, residual);
        }
        if missing > 0 {
            for &channel in self.gaps.missing() {
                residual[channel] = 0.0;
            }
            let observed = channels - missing;
            squares = if observed == 0 {
                0.0
            } else {
                ops::norm_squared(residual) * channels as f64 / observed as f64
            };
        }
        if !squares.is_finite() {
            return Err(Error::Overflow { what: "squared row" });
        }
        Ok(Split { residual_norm_squared: squares, missing, determined })
    }

    /// The model's own value of every channel: the mean and what the axes explain of `row`, after a refresh.
    ///
    /// # Errors
    /// As [`Self::split_into`].
    pub fn reconstruct_into(&mut self, row: &[f64], values: &mut [f64]) -> Result<Split, Error> {
        let mut scores = std::mem::take(&mut self.scores);
        let split = self.split_into(row, &mut scores, values);
        self.scores = scores;
        let split = split?;
        let axes = self.principal.found();
        let c = &mut self.scores[..axes.count()];
        for entry in &mut *c {
            *entry = -*entry;
        }
        ops::subtract(axes, c, self.mean.values(), values);
        Ok(split)
    }
}
