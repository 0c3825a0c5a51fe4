//! Two histories in one model.

use super::Tracker;
use crate::error::Error;
use crate::scalar::Scalar;

impl<T: Scalar> Tracker<T> {
    /// Takes in all that `other` has learned, as if its rows had been learned here too, the one that is behind in
    /// time ([`Tracker::clock`]) forgotten down to the later clock. Exact where nothing is truncated; what truncation
    /// gives up on either side, and here, is in the certificate. `O(channels (rank + guard)^2)`.
    ///
    /// # Errors
    /// [`Error::Unlike`] where channels, rank, memory or centring differ; [`Error::Overflow`]. The tracker is then
    /// as it was.
    pub fn merge(&mut self, other: &Self) -> Result<(), Error> {
        self.check_like(other)?;
        let behind = self.clock - other.clock;
        let kept = self.settings.kept(behind.abs());
        let mut theirs = other.mean.clone();
        let mut other_kept = 1.0;
        let energy = self.subspace.factor().energy() + other.subspace.factor().energy();
        let mut mean = self.mean.clone();
        if behind > 0.0 {
            theirs.decay(kept);
            other_kept = kept;
        } else if behind < 0.0 {
            mean.decay(kept);
        }
        mean.merge(&theirs, &mut self.scaled);
        if !(energy + crate::ops::norm_squared(&self.scaled)).is_finite() {
            return Err(Error::Overflow { what: "squared distance of the means" });
        }
        self.mean = mean;
        if behind < 0.0 {
            self.subspace.decay(kept);
        }
        let rounding = 2.0 * f64::EPSILON * self.mean_norm();
        self.subspace.absorb(&self.scaled, rounding);
        // The rows of R Q, one by one: together they are the other's scatter.
        let (q, factor) = (other.subspace.basis(), other.subspace.factor());
        let root = other_kept.sqrt();
        for row in 0..factor.size() {
            self.scaled.fill(0.0);
            for (direction, &entry) in factor.tail(row).iter().enumerate() {
                for (out, value) in self.scaled.iter_mut().zip(q.row(row + direction)) {
                    *out += root * entry * value.to_f64();
                }
            }
            self.subspace.absorb(&self.scaled, 0.0);
        }
        self.subspace.add_lost(other_kept * other.subspace.lost());
        self.clock = self.clock.max(other.clock);
        self.samples += other.samples;
        self.skipped += other.skipped;
        self.principal.outdate();
        Ok(())
    }

    /// Refuses a model of another kind.
    fn check_like(&self, other: &Self) -> Result<(), Error> {
        let (mine, theirs) = (&self.settings, &other.settings);
        let rows = |memory: Option<f64>| memory.map_or_else(|| "none".to_owned(), |rows| rows.to_string());
        let pairs = [
            ("channels", mine.channels.to_string(), theirs.channels.to_string()),
            ("rank", mine.rank.to_string(), theirs.rank.to_string()),
            ("memory", rows(mine.memory), rows(theirs.memory)),
            ("center", mine.center.to_string(), theirs.center.to_string()),
        ];
        for (what, expected, got) in pairs {
            if expected != got {
                return Err(Error::Unlike { what, expected, got });
            }
        }
        Ok(())
    }

    fn mean_norm(&self) -> f64 {
        crate::ops::norm_squared(self.mean.values()).sqrt()
    }
}
