//! Adding many vectors, a block at a time.
//!
//! A block of vectors is projected, subtracted and measured against the basis at matrix-matrix speed; then its
//! residuals are taken one after another against what the block itself has added. Each in-block subtraction
//! combines residuals linearly, so it combines their measured leftovers on the older basis the same way, and the
//! loss of every new vector against the whole basis is known without another sweep. Only a vector whose loss is
//! too large is swept once more on its own. (Block Gram-Schmidt with measured re-orthogonalization; its
//! stability without the measurement: Barlow and Smoktunowicz, Numer. Math. 123 (2013) 395-423.)

use super::orthogonalize::{LOSS_LIMIT, Measured, SAFE_SQUARES, check, clean, norm_of};
use super::{Basis, Step};
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// Vectors in a block: enough to be bound by arithmetic, few enough that the work inside the block stays small.
pub const BLOCK_ROWS: usize = 16;

/// Blocks already subtracted are subtracted once more at most: a vector that needs more is swept on its own.
const MOST_BLOCK_PASSES: u32 = 2;

/// Norm, in units of eps, of what rounding to the stored type changes in a vector of length one, at most.
const ROUNDING: f64 = 0.5;

/// Room for a block. Made with the first one.
#[derive(Clone, Debug, Default)]
pub(super) struct Workspace {
    /// Residuals, `BLOCK_ROWS` by `dim`.
    w: Vec<f64>,
    /// Coefficients on the basis before the block, a row a vector.
    h: Vec<f64>,
    /// What is left of that basis in the residuals.
    s: Vec<f64>,
    /// What was left before the last subtraction.
    correction: Vec<f64>,
    /// Coefficients on the vectors that the block added.
    inside: Vec<f64>,
    /// For each vector the block added, which of the block it is.
    added: Vec<usize>,
}

impl<T: Scalar> Basis<T> {
    /// Checks vectors, one after another in `rows`, as [`Basis::add`] would check each.
    ///
    /// # Errors
    /// Of the first vector that [`Basis::add`] would refuse, with its index; [`Error::Length`] where `rows` is
    /// not a whole number of vectors.
    pub fn check_rows(&self, rows: &[f64]) -> Result<(), Error> {
        let dim = self.dim();
        if !rows.len().is_multiple_of(dim) {
            return Err(Error::Length { what: "row", expected: dim, got: rows.len() });
        }
        for (index, row) in rows.chunks_exact(dim).enumerate() {
            check(row).map_err(|error| error.in_row(index))?;
        }
        Ok(())
    }

    /// Adds vectors, one after another in `rows`: the decisions of one [`Basis::add`] a vector, at
    /// matrix-matrix speed, `6 rank dim` flops a vector. Pushes a step a vector to `steps`.
    ///
    /// # Errors
    /// As [`Basis::check_rows`], before anything is added.
    pub fn add_rows(&mut self, rows: &[f64], steps: &mut Vec<Step>) -> Result<(), Error> {
        self.check_rows(rows)?;
        for block in rows.chunks(BLOCK_ROWS * self.dim()) {
            self.add_block(block, steps)?;
        }
        Ok(())
    }

    /// Adds at most [`BLOCK_ROWS`] vectors that have been checked.
    fn add_block(&mut self, rows: &[f64], steps: &mut Vec<Step>) -> Result<(), Error> {
        let dim = self.dim();
        let count = rows.len() / dim;
        let mut norms_squared = [0.0; BLOCK_ROWS];
        norms_squared
            .iter_mut()
            .zip(rows.chunks_exact(dim))
            .for_each(|(target, row)| *target = ops::norm_squared(row));
        let norms_squared = &norms_squared[..count];
        if count < 2 || norms_squared.iter().any(|squares| !SAFE_SQUARES.contains(squares)) {
            for row in rows.chunks_exact(dim) {
                steps.push(self.add(row)?);
            }
            return Ok(());
        }
        let mut block = std::mem::take(&mut self.block);
        let older = self.rank;
        block.w.resize(count * dim, 0.0);
        block.added.clear();
        for buffer in [&mut block.h, &mut block.s, &mut block.correction] {
            buffer.resize(count * older, 0.0);
        }
        let mut floors = [0.0; BLOCK_ROWS];
        for (floor, squares) in floors.iter_mut().zip(norms_squared) {
            *floor = (self.tolerance.relative * squares.sqrt()).max(self.tolerance.absolute);
        }
        let passes = self.subtract_older(rows, &mut block, &floors[..count]);
        for index in 0..count {
            let step = self.take(&mut block, index, norms_squared[index].sqrt(), floors[index], passes);
            steps.push(step);
        }
        self.block = block;
        Ok(())
    }

    /// Subtracts the basis from a whole block, measured, once more where a residual asks for it.
    fn subtract_older(&self, rows: &[f64], block: &mut Workspace, floors: &[f64]) -> u32 {
        let (older, count) = (self.rank, floors.len());
        let q = self.q.view(older);
        ops::project_block(q, rows, count, &mut block.h);
        ops::subtract_block(q, &block.h, rows, &mut block.w, count, &mut block.s);
        let mut passes = 1;
        while older > 0 && passes < MOST_BLOCK_PASSES {
            let clean = floors.iter().enumerate().all(|(index, &floor)| {
                let norm = ops::norm_squared(&block.w[index * self.dim()..][..self.dim()]).sqrt();
                let leftover = norm_of(&block.s[index * older..][..older]);
                leftover <= LOSS_LIMIT * T::EPSILON * norm || norm <= floor
            });
            if clean {
                break;
            }
            block.h.iter_mut().zip(&block.s).for_each(|(h, s)| *h += s);
            std::mem::swap(&mut block.s, &mut block.correction);
            ops::subtract_block_in_place(q, &block.correction, &mut block.w, count, &mut block.s);
            passes += 1;
        }
        passes
    }

    /// Takes residual `index` of a block against what the block has added, and decides.
    fn take(&mut self, block: &mut Workspace, index: usize, norm: f64, floor: f64, passes: u32) -> Step {
        let dim = self.dim();
        let rank = self.rank;
        let added = block.added.len();
        let older = rank - added;
        let w = &mut block.w[index * dim..][..dim];
        for buffer in [&mut block.inside, &mut self.s, &mut self.correction] {
            buffer.resize(added, 0.0);
        }
        let inside = self.q.view_range(older, added);
        ops::project(inside, w, &mut block.inside);
        let squares = ops::subtract_measured_in_place(inside, &block.inside, w, &mut self.s);
        let measured = Measured { squares, s: &mut self.s, correction: &mut self.correction };
        let mut cleaned = clean(inside, w, measured, &mut block.inside, floor);

        // The leftover on the older basis, combined as the residuals were.
        let (before, here) = block.s.split_at_mut(index * older);
        let here = &mut here[..older];
        for (&weight, &of) in block.inside.iter().zip(&block.added) {
            for (target, s) in here.iter_mut().zip(&before[of * older..]) {
                *target -= weight * s;
            }
        }
        cleaned.leftover = cleaned.leftover.hypot(norm_of(here));

        self.h.clear();
        self.h.extend_from_slice(&block.h[index * older..][..older]);
        self.h.extend_from_slice(&block.inside);
        let mut extra = 0;
        // What storing the block's own vectors rounded is not in their leftovers, and comes back times `inside`.
        let suspected = cleaned.leftover.hypot(ROUNDING * T::EPSILON * norm_of(&block.inside));
        if cleaned.norm > floor && suspected > LOSS_LIMIT * T::EPSILON * cleaned.norm {
            let q = self.q.view(rank);
            for buffer in [&mut self.s, &mut self.correction] {
                buffer.resize(rank, 0.0);
            }
            let squares = ops::project(q, w, &mut self.s);
            let measured = Measured { squares, s: &mut self.s, correction: &mut self.correction };
            cleaned = clean(q, w, measured, &mut self.h, floor);
            extra = cleaned.passes;
            here.copy_from_slice(&self.s[..older]);
        }
        let reason = self.reason(norm, cleaned.norm, floor, cleaned.loss());
        if reason.is_none() {
            self.push(cleaned.norm, &block.w[index * dim..][..dim], 0);
            block.s[index * older..][..older].iter_mut().for_each(|s| *s /= cleaned.norm);
            block.added.push(index);
        }
        Step {
            reason,
            rank,
            norm,
            residual_norm: cleaned.norm,
            threshold: floor,
            passes: passes + extra,
            loss: cleaned.loss(),
        }
    }
}
