//! The direction to give up: the right singular vector of the bordered factor that belongs to its smallest value.
//!
//! The inverse of the factor turns the question around: its largest singular value, which a tridiagonal matrix built from a
//! few products with it and its transpose gives (Lanczos, J. Res. Natl. Bur. Stand. 45 (1950) 255-282). Plain inverse iteration is slow
//! where the two smallest values are close, which is where a tracker lives: the weakest guard direction and the new one
//! both carry noise. This converges in a handful of steps and, after as many steps as there are rows, is exact.
//! The step count is decided by the residual, never fixed.

use super::factor::Factor;
use super::tridiagonal::Tridiagonal;
use crate::ops;
use crate::rows::{RowStore, Rows};

/// Cosine left between the image of the direction given up and that of any direction kept. What it costs is
/// of second order, its square: far below rounding.
const COUPLING: f64 = 1e-11;
/// A diagonal entry this far below the largest counts as that much: the direction is null either way.
const NULL: f64 = 1e-30;

/// Share of the square that a subtraction must leave to be clean.
const KEPT: f64 = 0.5;

/// Workspace of the search.
#[derive(Clone, Debug)]
pub(super) struct Smallest {
    /// The inverse, times the largest diagonal entry: squares of it stay in range.
    inverse: RowStore<f64>,
    /// Orthonormal vectors of the search, one a step.
    found: RowStore<f64>,
    square: Tridiagonal,
    image: Vec<f64>,
    /// The vector at hand, before and after it is made orthogonal to those found.
    raw: Vec<f64>,
    clean: Vec<f64>,
    products: Vec<f64>,
    zeros: Vec<f64>,
    direction: Vec<f64>,
}

impl Smallest {
    /// Workspace for factors of at most `limit` rows.
    pub(super) fn with_room(limit: usize) -> Self {
        Self {
            inverse: RowStore::zeros(limit, limit),
            found: RowStore::zeros(limit, limit),
            square: Tridiagonal::with_room(limit),
            image: vec![0.0; limit],
            raw: vec![0.0; limit],
            clean: vec![0.0; limit],
            products: vec![0.0; limit],
            zeros: vec![0.0; limit],
            direction: vec![0.0; limit],
        }
    }

    /// The unit vector found last.
    pub(super) fn direction(&self) -> &[f64] {
        &self.direction
    }

    /// Finds the direction of the smallest singular value of `factor`, which has as many rows as there is room for:
    /// `k^3 / 6` multiply-adds for the inverse, `2 k^2` a step, and some five to fifteen steps.
    pub(super) fn find(&mut self, factor: &Factor) {
        let size = self.raw.len();
        self.square.clear();
        let first = self.invert(factor);
        self.image.copy_from_slice(self.inverse.row(first));
        normalize(&mut self.image);
        ops::project(self.inverse.view(size), &self.image, &mut self.clean);
        normalize(&mut self.clean);
        let mut steps = 0;
        let mut before = 0.0;
        loop {
            self.found.row_mut(steps).copy_from_slice(&self.clean);
            // beta v_next = A A^T v - alpha v - beta v_before, A being the inverse; raw holds A A^T v, less the sign.
            let v = self.found.row(steps);
            let alpha = ops::subtract(self.inverse.view(size), v, &self.zeros, &mut self.image);
            ops::project(self.inverse.view(size), &self.image, &mut self.raw);
            for (entry, v) in self.raw.iter_mut().zip(v) {
                *entry = -(*entry + alpha * v);
            }
            if steps > 0 {
                for (entry, v) in self.raw.iter_mut().zip(self.found.row(steps - 1)) {
                    *entry -= before * v;
                }
            }
            steps += 1;
            orthogonalize(self.found.view(steps), &mut self.raw, &mut self.clean, &mut self.products);
            let beta = normalize(&mut self.clean);
            self.square.push(alpha, beta);
            let ends = steps == size || beta == 0.0;
            if ends || self.square.may_couple_below(COUPLING) {
                let largest = self.square.largest();
                let last = self.square.vector()[steps - 1];
                if ends || beta * last.abs() <= COUPLING * largest {
                    break;
                }
            }
            before = beta;
        }
        for (weight, entry) in self.products.iter_mut().zip(self.square.vector()) {
            *weight = -entry;
        }
        let weights = &self.products[..steps];
        ops::subtract(self.found.view(steps), weights, &self.zeros, &mut self.direction);
        normalize(&mut self.direction);
    }

    /// Forms the inverse and returns the longest of its rows: the image of the direction sought prevails in it.
    fn invert(&mut self, factor: &Factor) -> usize {
        let size = self.raw.len();
        let pivots = &mut self.raw;
        for (row, pivot) in pivots.iter_mut().enumerate() {
            *pivot = factor.tail(row)[0];
        }
        let scale = pivots.iter().fold(f64::MIN_POSITIVE, |largest, pivot| largest.max(pivot.abs()));
        for pivot in pivots.iter_mut().filter(|pivot| pivot.abs() < NULL * scale) {
            *pivot = NULL * scale;
        }
        let (entries, stride) = factor.entries();
        let (inverse, inverse_stride) = self.inverse.parts_mut();
        ops::invert_triangle(entries, stride, &pivots[..size], scale, inverse, inverse_stride)
    }
}

/// `clean` is `raw` less what lies along the vectors of `basis`: subtracted, and once more where most of it went, since
/// what is left then carries the rounding of the rest (twice is enough: Giraud, Langou, Rozloznik, van den Eshof, Numer.
/// Math. 101 (2005) 87-100). Near the identity every step leaves only a tenth.
fn orthogonalize(basis: Rows<'_, f64>, raw: &mut [f64], clean: &mut [f64], products: &mut [f64]) {
    let products = &mut products[..basis.count()];
    let before = ops::project(basis, raw, products);
    let after = ops::subtract(basis, products, raw, clean);
    if after < KEPT * before {
        raw.copy_from_slice(clean);
        ops::project(basis, raw, products);
        ops::subtract(basis, products, raw, clean);
    }
}

/// Scales to norm 1 and returns the norm; zero stays zero.
fn normalize(x: &mut [f64]) -> f64 {
    let norm = ops::norm_squared(x).sqrt();
    if norm > 0.0 {
        let scale = norm.recip();
        for entry in x {
            *entry *= scale;
        }
    }
    norm
}
