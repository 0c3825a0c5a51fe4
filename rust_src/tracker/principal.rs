//! Principal axes and energies, from the small factor when they are asked for.

use super::Tracker;
use super::rank::Rank;
use super::subspace::Subspace;
use crate::dense::Svd;
use crate::error::Error;
use crate::ops;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;

/// Axes and energies as of the last refresh.
#[derive(Clone, Debug)]
pub(super) struct Principal<T> {
    pub(super) axes: RowStore<T>,
    pub(super) fresh: RowStore<T>,
    pub(super) count: usize,
    pub(super) rank: Rank,
    pub(super) stale: bool,
    /// Energies of all directions tracked.
    pub(super) energies: Vec<f64>,
    /// Energy of all channels.
    pub(super) total: f64,
    /// Energy given up by truncation.
    pub(super) lost: f64,
    pub(super) svd: Workspace,
    pub(super) matrix: Vec<f64>,
    pub(super) weights: Vec<f64>,
    pub(super) overlap: Vec<f64>,
    pub(super) zeros: Vec<f64>,
    pub(super) axis: Vec<f64>,
}

/// Room for the decomposition, and the size it was made for; a copy makes its own when it needs it.
#[derive(Default)]
pub(super) struct Workspace(Option<(usize, Svd)>);

impl Clone for Workspace {
    fn clone(&self) -> Self {
        Self(None)
    }
}

impl std::fmt::Debug for Workspace {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str("Workspace")
    }
}

impl<T: Scalar> Principal<T> {
    pub(super) fn new(channels: usize, rank: usize, limit: usize) -> Self {
        Self {
            axes: RowStore::zeros(rank, channels),
            fresh: RowStore::zeros(rank, channels),
            count: 0,
            rank: Rank::fixed(rank),
            stale: false,
            energies: vec![0.0; limit],
            total: 0.0,
            lost: 0.0,
            svd: Workspace::default(),
            matrix: vec![0.0; limit * limit],
            weights: vec![0.0; limit],
            overlap: vec![0.0; rank],
            zeros: vec![0.0; channels],
            axis: vec![0.0; channels],
        }
    }

    /// Back to having found nothing.
    pub(super) fn clear(&mut self) {
        self.energies.fill(0.0);
        (self.count, self.total, self.lost, self.stale) = (0, 0.0, 0.0, true);
    }

    /// The factor has changed.
    pub(super) fn outdate(&mut self) {
        self.stale = true;
    }

    /// The axes found: fewer than the rank while fewer directions have been seen.
    pub(super) fn found(&self) -> Rows<'_, T> {
        self.axes.view(self.count)
    }

    fn refresh(&mut self, subspace: &Subspace<T>, weight: f64) -> Result<(), Error> {
        let size = subspace.count();
        let factor = subspace.factor();
        let matrix = &mut self.matrix[..size * size];
        matrix.fill(0.0);
        for row in 0..size {
            matrix[row * size + row..(row + 1) * size].copy_from_slice(factor.tail(row));
        }
        let svd = match &mut self.svd.0 {
            Some((made_for, svd)) if *made_for == size => svd,
            slot => &mut slot.insert((size, Svd::new(size, size))).1,
        };
        svd.decompose(matrix)?;
        // Divided, not multiplied by the reciprocal: that of a subnormal weight is no number.
        let weighted = |squares: f64| if weight > 0.0 { energy(squares / weight) } else { 0.0 };
        for (target, value) in self.energies.iter_mut().zip(svd.values()) {
            *target = weighted(value * value);
        }
        self.lost = weighted(subspace.lost());
        self.total = self.energies.iter().sum::<f64>() + self.lost;
        self.rank.choose(&self.energies, self.total);
        let before = self.count;
        let count = size.min(self.rank.reported());
        for index in 0..count {
            let direction = svd.right(index);
            for (out, entry) in self.weights.iter_mut().zip(direction) {
                *out = -entry;
            }
            ops::subtract(subspace.basis(), &self.weights[..size], &self.zeros, &mut self.axis);
            let sign = if before == 0 {
                largest(direction)
            } else {
                ops::project(self.axes.view(before), &self.axis, &mut self.overlap[..before]);
                largest(&self.overlap[..before])
            };
            ops::scale_into(1.0_f64.copysign(sign), &self.axis, self.fresh.row_mut(index));
        }
        std::mem::swap(&mut self.axes, &mut self.fresh);
        self.count = count;
        self.stale = false;
        Ok(())
    }
}

/// An energy, zero where it would be subnormal.
fn energy(value: f64) -> f64 {
    if value < f64::MIN_POSITIVE { 0.0 } else { value }
}

/// The entry of largest magnitude.
fn largest(values: &[f64]) -> f64 {
    values.iter().copied().fold(0.0, |best, value| if value.abs() > f64::abs(best) { value } else { best })
}

impl<T: Scalar> Tracker<T> {
    /// Brings axes and energies up to date with the rows learned; nothing to do where they are.
    ///
    /// One small decomposition, about `10 (rank + guard)^3` flops, and `rank` sweeps. Each axis keeps the sign of
    /// the one before that it overlaps most. Allocates only where the number of directions has grown.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], a defect of the decomposition; never seen.
    pub fn refresh(&mut self) -> Result<(), Error> {
        if self.principal.stale {
            self.principal.refresh(&self.subspace, self.mean.total())?;
        }
        Ok(())
    }

    /// Takes the room that [`Tracker::refresh`] needs once all directions are there: it allocates nothing then.
    pub(crate) fn make_room_to_refresh(&mut self) {
        let size = self.settings().directions();
        self.principal.svd.0 = Some((size, Svd::new(size, size)));
    }

    /// Axes reported: as set or, where a share is followed, as chosen at the last refresh.
    #[must_use]
    pub fn rank(&self) -> usize {
        self.principal.rank.reported()
    }

    /// The share of the variance that the number of axes follows; None where it is fixed.
    #[must_use]
    pub fn share(&self) -> Option<f64> {
        self.principal.rank.share()
    }

    /// From now on reports, at each refresh, as many axes as explain `share` of the variance: at most the rank set, and
    /// fewer than there are channels, so that there is a residual. With hysteresis: an axis is added where the share is not
    /// reached, and dropped only where those before it exceed the share by a fifth of what it leaves.
    ///
    /// # Errors
    /// [`Error::Parameter`] where `share` is not between 0 and 1.
    pub fn follow_share(&mut self, share: f64) -> Result<(), Error> {
        let most = self.settings.rank.min(self.settings.channels - 1);
        self.principal.rank.follow(share, most)?;
        self.principal.outdate();
        Ok(())
    }

    /// Whether rows were learned since the last refresh.
    #[must_use]
    pub fn is_stale(&self) -> bool {
        self.principal.stale
    }

    /// Principal axes as of the last refresh, `rank` unit rows, the strongest first; zero rows while fewer directions than
    /// that have been seen.
    #[must_use]
    pub fn axes(&self) -> Rows<'_, T> {
        self.principal.axes.view(self.rank())
    }

    /// Variances along the axes, descending, squared unit of the rows, as of the last refresh: sums of squares
    /// divided by the total weight.
    #[must_use]
    pub fn energies(&self) -> &[f64] {
        &self.principal.energies[..self.rank()]
    }

    /// Variances along the guard directions, which are tracked and not reported, as of the last refresh.
    #[must_use]
    pub fn guard_energies(&self) -> &[f64] {
        &self.principal.energies[self.rank()..]
    }

    /// Variance of all channels together, as of the last refresh. Exact: what truncation gave up is counted.
    #[must_use]
    pub fn total_energy(&self) -> f64 {
        self.principal.total
    }

    /// Variance of all channels together, of all rows learned so far. `O((rank + guard)^2)`.
    #[must_use]
    pub fn variance(&self) -> f64 {
        let total = self.mean.total();
        if total > 0.0 { (self.subspace.factor().energy() + self.subspace.lost()) / total } else { 0.0 }
    }

    /// Variance outside the reported axes, in all channels together, as of the last refresh.
    #[must_use]
    pub fn noise_energy(&self) -> f64 {
        self.guard_energies().iter().sum::<f64>() + self.principal.lost
    }

    /// Share of the total variance that the axes explain, 0 to 1, as of the last refresh; 1 where nothing varies.
    #[must_use]
    pub fn explained(&self) -> f64 {
        if self.principal.total > 0.0 {
            self.energies().iter().sum::<f64>() / self.principal.total
        } else {
            1.0
        }
    }

    /// Relative gap `(e_rank - e_next) / e_rank` after the last axis, 0 to 1, as of the last refresh. Near 0 the
    /// weakest axis and the strongest guard direction are interchangeable, and an angle says nothing. 0 where nothing
    /// varies.
    #[must_use]
    pub fn gap(&self) -> f64 {
        let Some(&last) = self.energies().last().filter(|energy| **energy > 0.0) else { return 0.0 };
        let next = self.guard_energies().first().copied().unwrap_or(self.principal.lost);
        ((last - next) / last).max(0.0)
    }

    /// Energy given up by truncation, as of the last refresh, in the unit of the energies.
    pub(super) fn lost_energy(&self) -> f64 {
        self.principal.lost
    }
}
