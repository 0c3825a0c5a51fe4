//! The drifting subspace.
//!
//! What has been learned is the weighted mean and the weighted scatter `C = sum_i w_i (x_i - mean)(x_i - mean)^T` of all rows,
//! each weight worth `lambda = 1 - 1/memory` less a tick. `C` is kept as `Q^T R^T R Q`, with `Q` orthonormal, `k` rows of
//! `channels`, and `R` a small upper triangle: a factor, never a covariance, so that a small energy beside a large one
//! keeps its digits.
//!
//! A tick decays `R` and borders it by the new row: the coefficients of the row on `Q`, and the norm of what `Q` does not
//! explain, whose direction becomes one more row of `Q`. One direction too many is then given up, the one that loses the
//! least: the right singular vector `z` of the bordered factor that belongs to its smallest singular value. A reflection
//! that sends `z` to the last unit vector is one rank-one change of `Q`, and one of `R`, which rotations bring back to a
//! triangle. So a tick costs `O(channels k)`, whatever happens; the reported principal axes are found from `R` when they
//! are asked for.
//!
//! A tick makes five passes over `Q`: project, subtract with measurement (one read from memory, one from cache), reflect
//! (read and write), and one row measured against the others: `12 k channels` flops, and `O(k^2)` for the factor.
//!
//! The scatter given up is known: with `d` the singular value given up at a tick, `lost <- lambda lost + d^2` is the trace
//! of what the tracked factor lacks, and no energy is further off than that (`certificate`).

mod certificate;
mod factor;
mod gaps;
mod merge;
mod principal;
mod settings;
mod smallest;
mod tridiagonal;
mod update;

pub use certificate::Certificate;
pub use gaps::Split;
pub use settings::Settings;
pub use update::{Skipped, Update};

use crate::error::Error;
use crate::memory::check_room;
use crate::orthonormal::{Mender, orthogonality_error};
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;
use factor::Factor;
use gaps::Gaps;
use principal::Principal;
use smallest::Smallest;
use update::Room;

/// A subspace that follows a stream of rows.
#[derive(Clone)]
pub struct Tracker<T: Scalar> {
    settings: Settings,
    /// The tracked directions; as many as the factor has rows count.
    q: RowStore<T>,
    factor: Factor,
    smallest: Smallest,
    mender: Mender,
    mean: Vec<f64>,
    /// Channels that have been observed.
    seen: Vec<bool>,
    /// Sum of the weights of the rows learned, each decayed.
    weight: f64,
    /// Trace of the scatter given up.
    lost: f64,
    /// Ticks passed.
    clock: f64,
    samples: u64,
    skipped: u64,
    principal: Principal<T>,
    gaps: Gaps,
    room: Room,
}

impl<T: Scalar> Tracker<T> {
    /// A tracker that has learned nothing.
    ///
    /// # Errors
    /// [`Error::Parameter`] naming the setting that is out of its range; [`Error::Memory`].
    pub fn new(settings: Settings) -> Result<Self, Error> {
        settings.check()?;
        let (channels, limit) = (settings.channels, settings.directions());
        // Directions, axes and workspace; the factor and what searches it.
        check_room(
            channels.saturating_add(4 * limit),
            limit.saturating_add(settings.rank).saturating_add(8),
        )?;
        Ok(Self {
            settings,
            q: RowStore::zeros(limit, channels),
            factor: Factor::with_room(limit + 1),
            smallest: Smallest::with_room(limit + 1),
            mender: Mender::with_room(limit, channels),
            mean: vec![0.0; channels],
            seen: vec![false; channels],
            weight: 0.0,
            lost: 0.0,
            clock: 0.0,
            samples: 0,
            skipped: 0,
            principal: Principal::new(channels, settings.rank, limit),
            gaps: Gaps::with_room(channels, settings.rank),
            room: Room::new(channels, limit),
        })
    }

    /// What it was made with.
    #[must_use]
    pub fn settings(&self) -> &Settings {
        &self.settings
    }

    /// The weighted mean of the rows learned; zero where `center` is off, and in channels not yet observed.
    #[must_use]
    pub fn mean(&self) -> &[f64] {
        &self.mean
    }

    /// Rows learned.
    #[must_use]
    pub fn samples(&self) -> u64 {
        self.samples
    }

    /// Rows skipped because too few of their channels were observed.
    #[must_use]
    pub fn skipped(&self) -> u64 {
        self.skipped
    }

    /// Sum of the weights of the rows learned, each decayed to now.
    #[must_use]
    pub fn total_weight(&self) -> f64 {
        self.weight
    }

    /// The tracked directions, reported and guard, in no particular order.
    #[must_use]
    pub fn directions(&self) -> Rows<'_, T> {
        self.q.view(self.factor.size())
    }

    /// Row `index` of the triangular factor from the diagonal on: `R Q` are the rows whose square is the scatter.
    #[must_use]
    pub fn factor_row(&self, index: usize) -> &[f64] {
        self.factor.tail(index)
    }

    /// Spectral norm of `I - Q Q^T` of the tracked directions, computed now.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen.
    pub fn orthogonality_error(&self) -> Result<f64, Error> {
        orthogonality_error(self.directions())
    }
}
