//! The drifting subspace.
//!
//! The scatter of the rows about their weighted mean, forgotten at a constant rate,
//!
//! ```text
//! C <- lambda C + (lambda w omega / (lambda w + omega)) d d^T,    w <- lambda w + omega,
//! ```
//!
//! (`d` the row less the old mean, `omega` its weight, `w` the total weight) is kept as `C = (R Q)^T (R Q)`: `k` = rank +
//! guard orthonormal rows `Q` and a triangular `R` of that size, never squared. A row borders `R` by one; the weakest
//! of the `k + 1` directions is given up, by one Householder reflection of the basis and a QR update of `R`. The cost of
//! a tick is constant: `10.5 k channels` flops in three sweeps and a fourth of one, `k^3 / 3` for the inverse of `R` and
//! about `100 k^2` to find the weakest direction and restore `R`. (It gives the subspace of the
//! classical rotate-and-cut update: Levy & Lindenbaum, IEEE Trans. Image Process. 9 (2000) 1371-1374; the mean as in
//! Ross, Lim, Lin, Yang, Int. J. Comput. Vision 77 (2008) 125-141.)
//!
//! Energies are variances, `C / w`. Principal axes are made from `R` when asked for. Rows whose deviations square out of
//! the range of numbers are refused; deviations below `1e-130` count as zero.

mod admit;
mod block;
mod by_channels;
mod by_rows;
mod certificate;
mod factor;
mod gaps;
mod mean;
mod merge;
mod normal;
mod principal;
mod rank;
mod root;
mod settings;
mod smallest;
mod split;
mod state;
mod subspace;
mod tridiagonal;
mod update;

pub use certificate::Certificate;
pub use settings::Settings;
pub use split::Split;
pub use update::{Skipped, Update};

use crate::angles::principal_angles;
use crate::error::Error;
use crate::memory::check_room;
use crate::orthonormal::orthogonality_error;
use crate::rows::Rows;
use crate::scalar::Scalar;
use gaps::Gaps;
use mean::Mean;
use principal::Principal;
use subspace::Subspace;

/// Mean, principal axes and energies of a stream of rows, learned a row at a time, the past forgotten at a constant rate.
#[derive(Clone, Debug)]
pub struct Tracker<T: Scalar> {
    settings: Settings,
    mean: Mean,
    subspace: Subspace<T>,
    principal: Principal<T>,
    gaps: Gaps,
    samples: u64,
    skipped: u64,
    clock: f64,
    /// The row less the mean, and what the scatter gains by it.
    delta: Vec<f64>,
    scaled: Vec<f64>,
    /// Workspace: coefficients on the basis, and on the axes.
    coefficients: Vec<f64>,
    scores: Vec<f64>,
    /// Workspace for rows in blocks.
    block: block::Workspace,
}

impl<T: Scalar> Tracker<T> {
    /// A tracker that has learned nothing. Holds `2 rank + guard` rows of `channels` in the stored type and a few in
    /// `f64`; from here on a row allocates nothing.
    ///
    /// # Errors
    /// [`Error::Parameter`] where rank, guard or memory is out of its range; [`Error::Memory`].
    pub fn new(settings: Settings) -> Result<Self, Error> {
        settings.check()?;
        let (channels, limit) = (settings.channels, settings.directions());
        // Directions, axes and workspace; the factor and what searches it.
        check_room(
            channels.saturating_add(6 * limit),
            limit.saturating_add(2 * settings.rank).saturating_add(12),
        )?;
        Ok(Self {
            settings,
            mean: Mean::new(channels, settings.center),
            subspace: Subspace::new(channels, limit),
            principal: Principal::new(channels, settings.rank, limit),
            gaps: Gaps::new(channels, limit),
            samples: 0,
            skipped: 0,
            clock: 0.0,
            delta: vec![0.0; channels],
            scaled: vec![0.0; channels],
            coefficients: vec![0.0; limit],
            scores: vec![0.0; settings.rank],
            block: block::Workspace::default(),
        })
    }

    /// Forgets all that was learned, as if made anew. Nothing is allocated.
    pub fn start_over(&mut self) {
        self.mean.clear();
        self.subspace.clear();
        self.principal.clear();
        (self.samples, self.skipped, self.clock) = (0, 0, 0.0);
    }

    /// What it was made with.
    #[must_use]
    pub fn settings(&self) -> &Settings {
        &self.settings
    }

    /// The weighted mean, a number a channel, in the unit of the rows; zeros where none is taken off.
    #[must_use]
    pub fn mean(&self) -> &[f64] {
        self.mean.values()
    }

    /// Rows learned.
    #[must_use]
    pub fn samples(&self) -> u64 {
        self.samples
    }

    /// Rows skipped because fewer channels were observed than `rank`.
    #[must_use]
    pub fn skipped(&self) -> u64 {
        self.skipped
    }

    /// Ticks passed: the sum of `elapsed` over the rows learned.
    #[must_use]
    pub fn clock(&self) -> f64 {
        self.clock
    }

    /// Sum of the weights of the rows learned, as far as they are remembered; `memory` in the long run.
    #[must_use]
    pub fn total_weight(&self) -> f64 {
        self.mean.total()
    }

    /// Principal angles between the two models' axes in radians, ascending, after a refresh of both.
    ///
    /// # Errors
    /// [`Error::Length`] where the channels differ in number.
    pub fn angles<U: Scalar>(&mut self, other: &mut Tracker<U>) -> Result<Vec<f64>, Error> {
        self.refresh()?;
        other.refresh()?;
        principal_angles(self.principal.found(), other.principal.found())
    }

    /// Spectral norm of `I - Q Q^T` for the tracked basis, computed now: the figure on which the others rest.
    /// `2 (rank + guard)^2 channels` flops.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen.
    pub fn orthogonality_error(&self) -> Result<f64, Error> {
        orthogonality_error(self.directions())
    }

    /// Row `index` of the triangular factor from the diagonal on: `R Q` are the rows whose square is the scatter.
    #[must_use]
    pub fn factor_row(&self, index: usize) -> &[f64] {
        self.subspace.factor().tail(index)
    }

    /// The tracked directions, reported and guard, in no particular order.
    #[must_use]
    pub fn directions(&self) -> Rows<'_, T> {
        self.subspace.basis()
    }
}
