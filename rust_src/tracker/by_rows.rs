//! The strongest directions of a block, where channels are many: the products of its rows, decomposed.
//!
//! With `A = [R Q; D]`, `u` an eigenvector of `A A^T` and `sigma^2` its eigenvalue, `u^T A / sigma` is a direction. Whatever
//! rounding has done to an orthonormal set `U` of them, `A^T A` is `(U^T A)^T (U^T A)` and a positive rest: squares decide
//! what is given up, never what the kept is worth. The directions themselves come out orthonormal to the rounding of
//! squares only; their products, measured, mend them.

use super::block::Past;
use super::root;
use super::subspace::Subspace;
use crate::dense::Eigen;
use crate::ops;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Rows in a block: as many as directions, but not fewer than this.
const LEAST_ROWS: usize = 16;

/// Workspace; the rows of `A` are handed in.
pub(super) struct ByRows {
    channels: usize,
    limit: usize,
    /// Order of the decomposition.
    order: usize,
    eigen: Eigen,
    products: Vec<f64>,
    /// The rows on the basis, and among themselves.
    h: Vec<f64>,
    inside: Vec<f64>,
    /// What makes the directions of the basis, of the rows.
    of_basis: Vec<f64>,
    of_rows: Vec<f64>,
    /// Their products, of which the root is taken, and its inverse.
    gram: Vec<f64>,
    inverse: Vec<f64>,
    fresh: Vec<f64>,
    image: Vec<f64>,
}

impl ByRows {
    /// Rows in a block: with as many as directions the decomposition is cheapest a row.
    pub(super) fn rows_for(channels: usize, limit: usize) -> usize {
        limit.max(LEAST_ROWS).min(channels - limit)
    }

    pub(super) fn new(channels: usize, limit: usize, most: usize) -> Self {
        let order = limit + most;
        Self {
            channels,
            limit,
            order,
            eigen: Eigen::new(order),
            products: vec![0.0; order * order],
            h: vec![0.0; most * limit],
            inside: vec![0.0; most * most],
            of_basis: vec![0.0; limit * limit],
            of_rows: vec![0.0; limit * most],
            gram: vec![0.0; limit * limit],
            inverse: vec![0.0; limit * limit],
            fresh: vec![0.0; limit * channels],
            image: vec![0.0; limit],
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
        let (channels, limit) = (self.channels, self.limit);
        let (held, rows) = rows.split_at_mut(limit * channels);
        let count = rows.len() / channels;
        let Some(block) = Rows::new(&*rows, channels, count, channels) else { return false };
        self.multiply(subspace, block, rows, past.kept.sqrt());
        if self.eigen.decompose(&self.products).is_err() {
            return false;
        }
        let values = self.eigen.values();
        if !past.tells_apart(values[self.order - limit], values[self.order - 1]) {
            return false;
        }
        self.choose(subspace, count, past.kept.sqrt());
        held.fill(0.0);
        ops::combine_block(subspace.basis(), &self.of_basis, held, limit);
        ops::combine_block(block, &self.of_rows[..limit * count], held, limit);

        let Some(found) = Rows::new(&*held, channels, limit, channels) else { return false };
        ops::project_block(found, held, limit, &mut self.gram);
        if !root::take(&mut self.gram, limit) {
            return false;
        }
        root::invert(&self.gram, limit, -1.0, &mut self.inverse);
        self.fresh.fill(0.0);
        ops::combine_block(found, &self.inverse, &mut self.fresh, limit);

        // The rows kept are sigma U times the mended directions.
        for (row, value) in self.gram.chunks_exact_mut(limit).zip(self.eigen.values().iter().rev()) {
            let sigma = value.sqrt();
            for entry in row {
                *entry *= sigma;
            }
        }
        let before = past.kept * subspace.factor().energy();
        subspace.factor_mut().restore(limit, &self.gram);
        let given_up = (before + past.energy) - subspace.factor().energy();
        subspace.replace(&self.fresh, past.kept, given_up);
        true
    }

    /// `A A^T`, lower triangle, with `scale R` for `R`; zeros where the block is short of rows.
    fn multiply<T: Scalar>(
        &mut self,
        subspace: &Subspace<T>,
        block: Rows<'_, f64>,
        rows: &[f64],
        scale: f64,
    ) {
        let (limit, order, count) = (self.limit, self.order, block.count());
        let (h, inside) = (&mut self.h[..count * limit], &mut self.inside[..count * count]);
        ops::project_block(subspace.basis(), rows, count, h);
        ops::project_block(block, rows, count, inside);
        let factor = subspace.factor();
        self.products.fill(0.0);
        let (held, new) = self.products.split_at_mut(limit * order);
        for (index, row) in held.chunks_exact_mut(order).enumerate() {
            // R R^T: row `index` of R against those above it.
            for (other, out) in row[..=index].iter_mut().enumerate() {
                *out = scale
                    * scale
                    * super::factor::dot(&factor.tail(other)[index - other..], factor.tail(index));
            }
        }
        let blocks = h.chunks_exact(limit).zip(inside.chunks_exact(count));
        for (row, (h, inside)) in new.chunks_exact_mut(order).zip(blocks) {
            let (on_basis, among) = row.split_at_mut(limit);
            factor.apply(h, on_basis);
            for entry in on_basis {
                *entry *= scale;
            }
            among[..count].copy_from_slice(inside);
        }
    }

    /// What combines basis and rows to the strongest directions, the strongest first, less the sign.
    fn choose<T: Scalar>(&mut self, subspace: &Subspace<T>, count: usize, scale: f64) {
        let (limit, order) = (self.limit, self.order);
        let found = self.eigen.strongest(limit).rchunks_exact(order).zip(self.eigen.values().iter().rev());
        let of_basis = self.of_basis.chunks_exact_mut(limit);
        let of_rows = self.of_rows.chunks_exact_mut(count);
        for ((u, value), (of_basis, of_rows)) in found.zip(of_basis.zip(of_rows)) {
            let reciprocal = -value.sqrt().recip();
            subspace.factor().apply_transposed(&u[..limit], &mut self.image);
            for (out, entry) in of_basis.iter_mut().zip(&self.image) {
                *out = scale * reciprocal * entry;
            }
            for (out, entry) in of_rows.iter_mut().zip(&u[limit..]) {
                *out = reciprocal * entry;
            }
        }
    }
}
