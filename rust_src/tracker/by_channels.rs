//! The strongest directions of a block, where channels are few: the scatter of the channels, decomposed.

use super::block::Past;
use super::subspace::Subspace;
use crate::dense::Eigen;
use crate::ops;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Most channels for each direction tracked, and most channels at all, for which one decomposition of order `channels` in
/// four rows a channel is cheaper than one of order twice the directions in as many rows as directions.
const MOST_TIMES: usize = 5;
const MOST: usize = 128;
/// Rows in a block, for each channel.
const ROWS: usize = 4;

/// Workspace; the rows of `A` are handed in.
pub(super) struct ByChannels {
    channels: usize,
    limit: usize,
    eigen: Eigen,
    /// `-A^T`, and the scatter.
    transposed: Vec<f64>,
    scatter: Vec<f64>,
    /// The directions found, and the rows' coefficients on them.
    axes: Vec<f64>,
    coefficients: Vec<f64>,
}

impl ByChannels {
    /// Whether channels are few beside `limit` directions.
    pub(super) fn suits(channels: usize, limit: usize) -> bool {
        channels <= (MOST_TIMES * limit).min(MOST)
    }

    /// Rows in a block.
    pub(super) fn rows_for(channels: usize) -> usize {
        ROWS * channels
    }

    pub(super) fn new(channels: usize, limit: usize, most: usize) -> Self {
        Self {
            channels,
            limit,
            eigen: Eigen::new(channels),
            transposed: vec![0.0; channels * (limit + most)],
            scatter: vec![0.0; channels * channels],
            axes: vec![0.0; limit * channels],
            coefficients: vec![0.0; (limit + most) * limit],
        }
    }

    /// Takes a block into `subspace`: room for its directions comes first in `rows`, the block's rows after it. False, and
    /// nothing done, where squares do not tell the directions apart.
    pub(super) fn reduce<T: Scalar>(
        &mut self,
        subspace: &mut Subspace<T>,
        rows: &mut [f64],
        past: Past,
    ) -> bool {
        let Self { channels, limit, .. } = *self;
        let count = rows.len() / channels;
        let held = &mut rows[..limit * channels];
        let factor = &mut self.coefficients[..limit * limit];
        subspace.factor().write(-past.kept.sqrt(), factor);
        held.fill(0.0);
        ops::combine_block(subspace.basis(), factor, held, limit);
        let before = ops::norm_squared(held);

        let transposed = &mut self.transposed[..channels * count];
        for (index, row) in rows.chunks_exact(channels).enumerate() {
            for (out, value) in transposed[index..].iter_mut().step_by(count).zip(row) {
                *out = -value;
            }
        }
        self.scatter.fill(0.0);
        let Some(all) = Rows::new(&*rows, channels, count, channels) else { return false };
        ops::combine_block(all, transposed, &mut self.scatter, channels);
        if self.eigen.decompose(&self.scatter).is_err() {
            return false;
        }
        let values = self.eigen.values();
        if !past.tells_apart(values[channels - limit], values[channels - 1]) {
            return false;
        }
        let strongest = self.eigen.strongest(limit).rchunks_exact(channels);
        for (axis, found) in self.axes.chunks_exact_mut(channels).zip(strongest) {
            axis.copy_from_slice(found);
        }
        let Some(axes) = Rows::new(&self.axes, channels, limit, channels) else { return false };
        let coefficients = &mut self.coefficients[..count * limit];
        ops::project_block(axes, rows, count, coefficients);
        let given_up = (before + past.energy) - ops::norm_squared(coefficients);
        subspace.replace(&self.axes, past.kept, given_up);
        let factor = subspace.factor_mut();
        factor.clear();
        for row in coefficients.chunks_exact_mut(limit) {
            factor.append(row);
        }
        true
    }
}
