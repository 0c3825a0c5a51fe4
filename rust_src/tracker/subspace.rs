//! The tracked rows `R Q`: an orthonormal basis and a small triangular factor, taking in one row after another.
//!
//! A row costs one sweep for `h = Q e`, one for the residual with its measured loss, one for the reflection, and every
//! fourth row one that measures an old direction: `(2 + 4 + 4 + 2 / 4) k channels` flops, and on the factor `k^3 / 3` for its
//! inverse and about `100 k^2`.

use super::factor::Factor;
use super::smallest::Smallest;
use crate::basis::{Measured, clean};
use crate::ops::{self, End};
use crate::orthonormal::Mender;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;

/// Share of the basis in a residual up to which one correction by what was measured leaves only rounding: the basis
/// being orthonormal to rounding, the correction errs by that much of itself.
const SLIGHT: f64 = 0.01;
/// Rows between two measurements of an old direction. What reflections leave in so many rows is below the limit at
/// which it is mended.
const MEASURED_EVERY: u64 = 4;
/// Squared norms below this carry no digits.
const NOTHING: f64 = 1e-300;
/// Squared norms of rows below this are no rows: of what a row leaves, as little as `2^-52` of it counts, and the square of
/// that has to be a number with all its digits, or the direction made of it is of no unit length.
const NO_ROW: f64 = 1e-260;

/// Basis and factor, with room for one direction more than is kept.
#[derive(Clone, Debug)]
pub(super) struct Subspace<T> {
    pub(super) q: RowStore<T>,
    pub(super) limit: usize,
    pub(super) factor: Factor,
    pub(super) smallest: Smallest,
    /// Sum of the squared singular values given up, forgotten at the same rate as the rest.
    pub(super) lost: f64,
    pub(super) mender: Mender,
    /// Directions given up so far.
    pub(super) cuts: u64,
    pub(super) h: Vec<f64>,
    pub(super) s: Vec<f64>,
    pub(super) correction: Vec<f64>,
    pub(super) w: Vec<f64>,
    pub(super) along: Vec<f64>,
    pub(super) image: Vec<f64>,
}

impl<T: Scalar> Subspace<T> {
    /// Nothing yet; at most `limit` directions of `channels` entries.
    pub(super) fn new(channels: usize, limit: usize) -> Self {
        Self {
            q: RowStore::zeros(limit, channels),
            limit,
            factor: Factor::with_room(limit + 1),
            smallest: Smallest::with_room(limit + 1),
            lost: 0.0,
            mender: Mender::with_room(limit, channels),
            cuts: 0,
            h: vec![0.0; limit + 1],
            s: Vec::with_capacity(limit),
            correction: Vec::with_capacity(limit),
            w: vec![0.0; channels],
            along: vec![0.0; limit + 1],
            image: vec![0.0; limit + 1],
        }
    }

    /// Back to having taken in nothing.
    pub(super) fn clear(&mut self) {
        self.factor.restore(0, &[]);
        (self.lost, self.cuts) = (0.0, 0);
    }

    /// Directions held.
    pub(super) fn count(&self) -> usize {
        self.factor.size()
    }

    pub(super) fn basis(&self) -> Rows<'_, T> {
        self.q.view(self.count())
    }

    pub(super) fn factor(&self) -> &Factor {
        &self.factor
    }

    /// To be written together with [`Self::replace`].
    pub(super) fn factor_mut(&mut self) -> &mut Factor {
        &mut self.factor
    }

    /// Takes `directions`, as many as are kept, orthonormal and one after another, for the basis; of the energy lost before
    /// the share `kept` remains, and `given_up` is added.
    pub(super) fn replace(&mut self, directions: &[f64], kept: f64, given_up: f64) {
        for (index, direction) in directions.chunks_exact(self.q.dim()).enumerate() {
            ops::scale_into(1.0, direction, self.q.row_mut(index));
        }
        // Rounding of a difference may leave less than nothing.
        self.lost = kept * self.lost + given_up.max(0.0);
        if self.lost < NOTHING {
            self.lost = 0.0;
        }
        self.cuts += 1;
        self.mender.take_turn(&mut self.q, self.limit, End::Front);
    }

    /// Energy given up so far, weighted as the rest: the trace of what the factor lacks.
    pub(super) fn lost(&self) -> f64 {
        self.lost
    }

    /// Forgets: energies keep the share `kept`.
    pub(super) fn decay(&mut self, kept: f64) {
        if kept < 1.0 {
            self.factor.decay(kept.sqrt());
            self.lost *= kept;
            if self.lost < NOTHING {
                self.lost = 0.0;
            }
        }
    }

    /// Counts as lost what another subspace had lost.
    pub(super) fn add_lost(&mut self, lost: f64) {
        self.lost += lost;
    }

    /// Where the first sweep of the next row starts: where the last one of the row before finished. Three sweeps a row and
    /// one more where a direction is measured, each from the other end than the one before.
    fn end(&self) -> End {
        if (3 * (self.cuts % 2) + self.cuts / MEASURED_EVERY).is_multiple_of(2) {
            End::Front
        } else {
            End::Back
        }
    }

    /// Takes in a row `e` of finite squared norm; residuals up to `rounding` carry no direction.
    pub(super) fn absorb(&mut self, e: &[f64], rounding: f64) {
        let count = self.count();
        let q = self.q.view(count);
        let end = self.end();
        let squares = ops::project_from(end, q, e, &mut self.h[..count]);
        if squares < NO_ROW {
            return;
        }
        let tolerance = rounding + e.len() as f64 * T::EPSILON * squares.sqrt();
        for buffer in [&mut self.s, &mut self.correction] {
            buffer.resize(count, 0.0);
        }
        let h = &self.h[..count];
        let squares = ops::subtract_measured_from(end.other(), q, h, e, &mut self.w, &mut self.s);
        let leftover: f64 = self.s.iter().map(|entry| entry * entry).sum();
        let full = count == self.limit && count < self.q.dim();
        let norm = if full && leftover <= SLIGHT * SLIGHT * squares {
            for (sum, more) in self.h.iter_mut().zip(&self.s) {
                *sum += more;
            }
            (squares - leftover).sqrt()
        } else {
            let measured = Measured { squares, s: &mut self.s, correction: &mut self.correction };
            let norm = clean(q, &mut self.w, measured, &mut self.h[..count], tolerance).norm;
            self.s.fill(0.0);
            norm
        };
        if norm <= tolerance || count == self.q.dim() {
            self.factor.append(&mut self.h[..count]);
            self.lost += norm * norm;
            return;
        }
        self.h[count] = norm;
        self.factor.border(&mut self.h[..=count]);
        if count < self.limit {
            ops::normalize_into(norm, &self.w, self.q.row_mut(count));
        } else {
            self.give_up(norm);
        }
    }

    /// Gives up the weakest of the directions held and the new one, `w` less what `s` says it holds of the others, of
    /// norm `norm`.
    ///
    /// The reflection that sends it to the last place turns "rotate and cut" into one change of rank one; the sign of
    /// the last entry is chosen so that forming `u` cancels nothing. `w` is cleaned in the same sweep: `along` is `u`
    /// for the cleaned and normalized direction.
    fn give_up(&mut self, norm: f64) {
        let count = self.limit;
        let end = self.end();
        self.smallest.find(&self.factor);
        let z = self.smallest.direction();
        self.factor.apply(z, &mut self.image);
        self.lost += ops::norm_squared(&self.image);
        let u = &mut self.h;
        u.copy_from_slice(z);
        let sign = 1.0_f64.copysign(u[count]);
        u[count] += sign;
        self.factor.add_last_column(sign, &mut self.image);
        let scale = ops::norm_squared(u).sqrt().recip();
        for (entry, image) in u.iter_mut().zip(&mut self.image) {
            *entry *= scale;
            *image *= scale;
        }
        let last = u[count] / norm;
        self.along[count] = last;
        for ((out, entry), left) in self.along.iter_mut().zip(&*u).zip(&self.s) {
            *out = entry - last * left;
        }
        let (rows, stride) = self.q.parts_mut();
        ops::reflect_along(end, rows, stride, u, &self.along, &self.w);
        self.factor.cut(u, &mut self.image);
        self.cuts += 1;
        if self.cuts.is_multiple_of(MEASURED_EVERY) {
            self.mender.take_turn(&mut self.q, count, end.other());
        }
    }
}
