//! The tracked rows `R Q`: an orthonormal basis and a small triangular factor, taking in one row after another.
//!
//! A row costs one sweep for `h = Q e`, one for the residual with its measured loss, one for the reflection and
//! one that measures an old direction: `12 k channels` flops, and `O(k^2)` on the factor.

use super::factor::Factor;
use super::smallest::Smallest;
use crate::basis::{Measured, clean};
use crate::ops;
use crate::orthonormal::Mender;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;

/// Squared norms below this carry no digits.
const NOTHING: f64 = 1e-300;

/// Basis and factor, with room for one direction more than is kept.
#[derive(Clone, Debug)]
pub(super) struct Subspace<T> {
    q: RowStore<T>,
    limit: usize,
    factor: Factor,
    smallest: Smallest,
    /// Sum of the squared singular values given up, forgotten at the same rate as the rest.
    lost: f64,
    mender: Mender,
    h: Vec<f64>,
    s: Vec<f64>,
    correction: Vec<f64>,
    w: Vec<f64>,
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
            h: vec![0.0; limit + 1],
            s: Vec::with_capacity(limit),
            correction: Vec::with_capacity(limit),
            w: vec![0.0; channels],
        }
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

    /// Takes in a row `e` of finite squared norm; residuals up to `rounding` carry no direction.
    pub(super) fn absorb(&mut self, e: &[f64], rounding: f64) {
        let count = self.count();
        let q = self.q.view(count);
        let squares = ops::project(q, e, &mut self.h[..count]);
        if squares < NOTHING {
            return;
        }
        let tolerance = rounding + e.len() as f64 * T::EPSILON * squares.sqrt();
        for buffer in [&mut self.s, &mut self.correction] {
            buffer.resize(count, 0.0);
        }
        let squares = ops::subtract_measured(q, &self.h[..count], e, &mut self.w, &mut self.s);
        let measured = Measured { squares, s: &mut self.s, correction: &mut self.correction };
        let norm = clean(q, &mut self.w, measured, &mut self.h[..count], tolerance).norm;
        if norm <= tolerance || count == self.q.dim() {
            self.factor.append(&mut self.h[..count]);
            self.lost += norm * norm;
        } else if count < self.limit {
            ops::normalize_into(norm, &self.w, self.q.row_mut(count));
            self.h[count] = norm;
            self.factor.border(&mut self.h[..=count]);
        } else {
            self.h[count] = norm;
            self.factor.border(&mut self.h[..=count]);
            let scale = norm.recip();
            self.w.iter_mut().for_each(|entry| *entry *= scale);
            self.give_up();
        }
    }

    /// Gives up the weakest of the directions held and the new one in `w`.
    ///
    /// The reflection that sends it to the last place turns "rotate and cut" into one change of rank one; the sign of
    /// the last entry is chosen so that forming `u` cancels nothing.
    fn give_up(&mut self) {
        let size = self.factor.size();
        self.smallest.find(&self.factor);
        let z = self.smallest.direction(size);
        self.factor.apply(z, &mut self.h);
        self.lost += self.h[..size].iter().map(|entry| entry * entry).sum::<f64>();
        let u = &mut self.h[..size];
        u.copy_from_slice(z);
        u[size - 1] += 1.0_f64.copysign(u[size - 1]);
        let norm = u.iter().map(|entry| entry * entry).sum::<f64>().sqrt();
        for entry in &mut *u {
            *entry /= norm;
        }
        let (rows, stride) = self.q.parts_mut();
        ops::reflect(rows, stride, size - 1, u, &self.w);
        self.factor.cut(u);
        // Rounding in the reflections is caught within as many rows as there are directions.
        self.mender.take_turn(&mut self.q, size - 1);
    }
}
