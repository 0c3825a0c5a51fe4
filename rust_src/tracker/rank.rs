//! How many axes are reported: as many as asked for, or as many as explain a share of the variance.

use crate::error::Error;

/// Part of the unexplained variance that the axes before the last must leave room for until the last is dropped: a share
/// that hovers at its mark moves nothing.
const SLACK: f64 = 0.2;

/// The number of axes reported.
#[derive(Clone, Copy, Debug)]
pub(super) struct Rank {
    pub(super) share: Option<f64>,
    pub(super) most: usize,
    pub(super) reported: usize,
}

impl Rank {
    /// Always `rank`.
    pub(super) fn fixed(rank: usize) -> Self {
        Self { share: None, most: rank, reported: rank }
    }

    pub(super) fn reported(&self) -> usize {
        self.reported
    }

    pub(super) fn share(&self) -> Option<f64> {
        self.share
    }

    /// Follows `share`, 1 to `most` axes.
    pub(super) fn follow(&mut self, share: f64, most: usize) -> Result<(), Error> {
        if !(share > 0.0 && share < 1.0) {
            return Err(Error::Parameter {
                name: "share",
                expected: "a number between 0 and 1".into(),
                got: share.to_string(),
            });
        }
        *self = Self { share: Some(share), most: most.max(1), reported: self.reported.min(most).max(1) };
        Ok(())
    }

    /// Chooses anew from descending `energies` of sum at most `total`: one axis more as long as the share is not
    /// reached, one less as long as those before the last exceed it clearly.
    pub(super) fn choose(&mut self, energies: &[f64], total: f64) {
        let Some(share) = self.share.filter(|_| total > 0.0) else { return };
        let explained = |rank: usize| energies[..rank].iter().sum::<f64>() / total;
        while self.reported < self.most && explained(self.reported) < share {
            self.reported += 1;
        }
        while self.reported > 1 && explained(self.reported - 1) >= share + SLACK * (1.0 - share) {
            self.reported -= 1;
        }
    }
}
