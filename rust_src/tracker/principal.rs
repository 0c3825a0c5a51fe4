//! Principal axes and energies, found from the factor when they are asked for.

use super::Tracker;
use crate::angles::principal_angles;
use crate::dense::Svd;
use crate::error::Error;
use crate::ops;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;

/// The axes of the last refresh.
pub(super) struct Principal<T> {
    axes: RowStore<T>,
    rank: usize,
    /// Variances along all directions, reported and guard, descending.
    energies: Vec<f64>,
    svd: Svd,
    matrix: Vec<f64>,
    coefficients: Vec<f64>,
    sum: Vec<f64>,
    zero: Vec<f64>,
    /// Weight learned since.
    since: f64,
}

impl<T: Scalar> Clone for Principal<T> {
    fn clone(&self) -> Self {
        let limit = self.energies.len();
        let mut clone = Self::new(self.axes.dim(), self.rank, limit);
        clone.axes = self.axes.clone();
        clone.energies.copy_from_slice(&self.energies);
        clone.since = self.since;
        clone
    }
}

impl<T: Scalar> Principal<T> {
    pub fn new(channels: usize, rank: usize, limit: usize) -> Self {
        Self {
            axes: RowStore::zeros(rank, channels),
            rank,
            energies: vec![0.0; limit],
            svd: Svd::new(limit, limit),
            matrix: vec![0.0; limit * limit],
            coefficients: vec![0.0; limit],
            sum: vec![0.0; channels],
            zero: vec![0.0; channels],
            since: 0.0,
        }
    }

    /// Notes that a row of that weight was learned.
    pub fn learned(&mut self, weight: f64) {
        self.since += weight;
    }

    /// The reported axes.
    pub fn axes(&self) -> Rows<'_, T> {
        self.axes.view(self.rank)
    }
}

impl<T: Scalar> Tracker<T> {
    /// Whether anything was learned since the axes were found.
    #[must_use]
    pub fn is_stale(&self) -> bool {
        self.principal.since > 0.0
    }

    /// Finds the principal axes and energies anew where something was learned since: a decomposition of the factor,
    /// some `10 k^3` flops, and `2 rank k channels` for the axes. Each axis keeps the sign that points along the axis
    /// it follows.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen; the axes stay as they were.
    pub fn refresh(&mut self) -> Result<(), Error> {
        if !self.is_stale() {
            return Ok(());
        }
        let size = self.factor.size();
        let principal = &mut self.principal;
        let limit = principal.energies.len();
        principal.matrix.fill(0.0);
        for row in 0..size {
            principal.matrix[row * limit + row..][..size - row].copy_from_slice(self.factor.tail(row));
        }
        principal.svd.decompose(&principal.matrix)?;
        let per_weight = if self.weight > 0.0 { self.weight.recip() } else { 0.0 };
        for (energy, value) in principal.energies.iter_mut().zip(principal.svd.values()) {
            *energy = value * value * per_weight;
        }
        for index in 0..principal.rank {
            let axis = principal.axes.row_mut(index);
            if index >= size {
                axis.fill(T::default());
                continue;
            }
            let coefficients = &mut principal.coefficients[..size];
            for (target, value) in coefficients.iter_mut().zip(principal.svd.right(index)) {
                *target = -value;
            }
            ops::subtract(self.q.view(size), coefficients, &principal.zero, &mut principal.sum);
            let along: f64 = axis.iter().zip(&principal.sum).map(|(old, new)| old.to_f64() * new).sum();
            ops::scale_into(if along < 0.0 { -1.0 } else { 1.0 }, &principal.sum, axis);
        }
        principal.since = 0.0;
        Ok(())
    }

    /// Whether the axes lag so far behind that gaps should not be filled by them.
    pub(super) fn gaps_need_axes(&self) -> bool {
        self.principal.since > GAP_LAG * self.weight
    }

    /// The reported axes of the last refresh, `rank` by `channels`, orthonormal; zero rows while fewer directions than
    /// that have been seen.
    #[must_use]
    pub fn axes(&self) -> Rows<'_, T> {
        self.principal.axes()
    }

    /// Weighted variances along the axes as of the last refresh, descending, `rank` of them.
    #[must_use]
    pub fn energies(&self) -> &[f64] {
        &self.principal.energies[..self.settings.rank]
    }

    /// Weighted variances along the guard directions, which are tracked and not reported, as of the last refresh.
    #[must_use]
    pub fn guard_energies(&self) -> &[f64] {
        &self.principal.energies[self.settings.rank..]
    }

    /// What turns scatter into variance.
    pub(super) fn per_weight(&self) -> f64 {
        if self.weight > 0.0 { self.weight.recip() } else { 0.0 }
    }

    /// Weighted variance in all channels together: what is tracked, and what was given up.
    #[must_use]
    pub fn total_energy(&self) -> f64 {
        (self.factor.energy() + self.lost) * self.per_weight()
    }

    /// Weighted variance outside the reported axes, in all channels together.
    #[must_use]
    pub fn noise_energy(&self) -> f64 {
        let guard: f64 = self.guard_energies().iter().sum();
        guard + self.lost * self.per_weight()
    }

    /// Share of the variance along the reported axes; 1 where nothing varies.
    #[must_use]
    pub fn explained(&self) -> f64 {
        let reported: f64 = self.energies().iter().sum();
        let total = reported + self.noise_energy();
        if total > 0.0 { reported / total } else { 1.0 }
    }

    /// Relative eigengap below the last reported axis, `1 - energy_below / energy`: near 0 the subspace, and so any
    /// angle to it, means nothing. 0 where nothing varies.
    #[must_use]
    pub fn gap(&self) -> f64 {
        let last = self.energies().last().copied().unwrap_or(0.0);
        let next = self.guard_energies().first().copied().unwrap_or(0.0);
        if last > 0.0 { 1.0 - next / last } else { 0.0 }
    }

    /// Principal angles, in radians and ascending, between the reported axes of both, each refreshed.
    ///
    /// # Errors
    /// [`Error::Length`] where the channels differ in number.
    pub fn angles<U: Scalar>(&mut self, other: &mut Tracker<U>) -> Result<Vec<f64>, Error> {
        self.refresh()?;
        other.refresh()?;
        principal_angles(self.axes(), other.axes())
    }
}

/// Share of the learned weight by which axes that fill gaps may lag: it moves what is filled in by as much, far less
/// than the noise of the channel.
const GAP_LAG: f64 = 0.01;
