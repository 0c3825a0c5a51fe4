//! A channel that had no part so far.

use super::Tracker;
use super::subspace::Subspace;
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

impl<T: Scalar> Tracker<T> {
    /// Lets `channel`, which has read as its mean up to now, take part as if its deviations had been
    /// `loadings . deviations of the row` all along: else its loadings would only be learned as fast as the past is
    /// forgotten. `loadings` has an entry a channel, that of `channel` itself counts for nothing. What the tracker keeps is
    /// taken anew: `O(channels (rank + guard)^2)` and as much memory as a tracker for the while.
    ///
    /// # Errors
    /// [`Error::Length`], [`Error::NonFinite`] of the loadings; the tracker is as it was.
    pub fn admit(&mut self, channel: usize, loadings: &[f64]) -> Result<(), Error> {
        let channels = self.settings.channels;
        if loadings.len() != channels || channel >= channels {
            return Err(Error::Length { what: "loadings", expected: channels, got: loadings.len() });
        }
        if let Some(index) = loadings.iter().position(|entry| !entry.is_finite()) {
            return Err(Error::NonFinite { what: "loadings", index, value: loadings[index] });
        }
        let mut subspace = Subspace::new(channels, self.subspace.limit);
        let (q, factor) = (self.subspace.basis(), self.subspace.factor());
        // The rows of R Q, one by one: together they are the scatter.
        for row in 0..factor.size() {
            self.scaled.fill(0.0);
            for (direction, &entry) in factor.tail(row).iter().enumerate() {
                for (out, value) in self.scaled.iter_mut().zip(q.row(row + direction)) {
                    *out += entry * value.to_f64();
                }
            }
            self.scaled[channel] = 0.0;
            self.scaled[channel] =
                self.scaled.iter().zip(loadings).map(|(entry, weight)| entry * weight).sum();
            if !ops::norm_squared(&self.scaled).is_finite() {
                return Err(Error::Overflow { what: "loadings" });
            }
            subspace.absorb(&self.scaled, 0.0);
        }
        subspace.add_lost(self.subspace.lost());
        self.subspace = subspace;
        self.principal.outdate();
        Ok(())
    }
}
