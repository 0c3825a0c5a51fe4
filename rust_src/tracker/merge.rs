//! Two histories in one model.

use super::Tracker;
use crate::error::Error;
use crate::scalar::Scalar;

impl<T: Scalar> Tracker<T> {
    /// Takes in all that `other` has learned, both decayed to the later of the two clocks. Exact where neither has given up
    /// anything and none is given up here; otherwise within the certificate. `O(k^2 channels)` flops.
    ///
    /// # Errors
    /// [`Error::Unlike`] where channels, memory or centring differ.
    pub fn merge(&mut self, other: &Self) -> Result<(), Error> {
        self.check_like(other)?;
        let clock = self.clock.max(other.clock);
        self.decay(clock - self.clock);
        // Rounding of the difference apart, the clock is the later one.
        self.clock = clock;
        let kept = self.settings.kept(clock - other.clock);
        let (here, there) = (self.weight, other.weight * kept);
        if there == 0.0 {
            return Ok(());
        }
        self.weight = here + there;
        let mut row = vec![0.0; other.factor.size()];
        for index in 0..other.factor.size() {
            row.fill(0.0);
            row[index..].copy_from_slice(other.factor.tail(index));
            self.room.d.fill(0.0);
            for (axis, value) in other.directions().iter().zip(&row) {
                let weight = value * kept.sqrt();
                self.room.d.iter_mut().zip(axis).for_each(|(d, q)| *d += weight * q.to_f64());
            }
            self.absorb();
        }
        if self.settings.center {
            // Between the two means lies the scatter here there / (here + there) delta delta^T.
            let scale = (here * (there / self.weight)).sqrt();
            for index in 0..self.mean.len() {
                let delta = match (self.seen[index], other.seen[index]) {
                    (true, true) => other.mean[index] - self.mean[index],
                    (false, true) => {
                        self.mean[index] = other.mean[index];
                        self.seen[index] = true;
                        0.0
                    }
                    _ => 0.0,
                };
                self.room.d[index] = scale * delta;
                self.mean[index] += there / self.weight * delta;
            }
            self.absorb();
        }
        self.lost += other.lost * kept;
        self.samples += other.samples;
        self.skipped += other.skipped;
        self.principal.learned(there);
        Ok(())
    }

    fn check_like(&self, other: &Self) -> Result<(), Error> {
        let (mine, theirs) = (&self.settings, &other.settings);
        let pairs = [
            ("channels", mine.channels.to_string(), theirs.channels.to_string()),
            ("rank", mine.rank.to_string(), theirs.rank.to_string()),
            ("memory", format!("{:?}", mine.memory), format!("{:?}", theirs.memory)),
            ("center", mine.center.to_string(), theirs.center.to_string()),
        ];
        for (what, expected, got) in pairs {
            if expected != got {
                return Err(Error::Unlike { what, expected, got });
            }
        }
        Ok(())
    }
}
