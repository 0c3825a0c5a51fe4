//! The direction to give up: the right singular vector of the bordered factor that belongs to its smallest value.
//!
//! The inverse of the factor turns the question around: its largest singular value, which a bidiagonal matrix built from a
//! few products with it gives (Golub & Kahan, J. SIAM Numer. Anal. B 2 (1965) 205-224). Plain inverse iteration is slow
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
    /// Orthonormal vectors of the search, one a step: in the space of the images, and of the directions.
    left: RowStore<f64>,
    right: RowStore<f64>,
    /// The bidiagonal matrix.
    alpha: Vec<f64>,
    beta: Vec<f64>,
    square: Tridiagonal,
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
            left: RowStore::zeros(limit, limit),
            right: RowStore::zeros(limit, limit),
            alpha: vec![0.0; limit],
            beta: vec![0.0; limit],
            square: Tridiagonal::with_room(limit),
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
        self.left.row_mut(0).copy_from_slice(self.inverse.row(first));
        normalize(self.left.row_mut(0));
        let mut steps = 0;
        loop {
            // alpha u = A v - beta u_before, with A the inverse.
            ops::project(self.inverse.view(size), self.left.row(steps), &mut self.raw);
            orthogonalize(self.right.view(steps), &mut self.raw, &mut self.clean, &mut self.products);
            let alpha = normalize(&mut self.clean);
            self.right.row_mut(steps).copy_from_slice(&self.clean);
            self.alpha[steps] = alpha;
            let before = if steps == 0 { 0.0 } else { self.beta[steps - 1] };
            // -beta v_next = alpha v - A^T u.
            steps += 1;
            ops::subtract(self.inverse.view(size), &self.clean, &self.zeros, &mut self.raw);
            orthogonalize(self.left.view(steps), &mut self.raw, &mut self.clean, &mut self.products);
            let beta = normalize(&mut self.clean);
            self.beta[steps - 1] = beta;
            self.square.push(alpha * alpha + before * before, alpha * beta);
            let ends = steps == size || alpha == 0.0 || beta == 0.0;
            if ends || self.square.may_couple_below(COUPLING) {
                let largest = self.square.largest();
                let last = self.square.vector()[steps - 1];
                if ends || alpha * beta * last.abs() <= COUPLING * largest {
                    break;
                }
            }
            let next = self.left.row_mut(steps);
            for (out, entry) in next.iter_mut().zip(&self.clean) {
                *out = -entry;
            }
        }
        self.assemble(steps);
    }

    /// Forms the inverse, from the last row up, and returns the longest of its rows: the image of the direction sought
    /// prevails in it.
    fn invert(&mut self, factor: &Factor) -> usize {
        let size = self.raw.len();
        let scale = (0..size).map(|row| factor.tail(row)[0].abs()).fold(f64::MIN_POSITIVE, f64::max);
        let (mut longest, mut first) = (0.0, 0);
        for row in (0..size).rev() {
            let tail = factor.tail(row);
            self.raw[row..].fill(0.0);
            for (below, &entry) in tail.iter().enumerate().skip(1) {
                let solved = &self.inverse.row(row + below)[row + below..];
                for (out, value) in self.raw[row + below..].iter_mut().zip(solved) {
                    *out -= entry * value;
                }
            }
            self.raw[row] = scale;
            let pivot = if tail[0].abs() < NULL * scale { NULL * scale } else { tail[0] };
            let reciprocal = pivot.recip();
            let mut squares = 0.0;
            for (out, value) in self.inverse.row_mut(row)[row..].iter_mut().zip(&self.raw[row..]) {
                *out = value * reciprocal;
                squares += *out * *out;
            }
            if squares > longest {
                (longest, first) = (squares, row);
            }
        }
        first
    }

    /// The direction from the vector of the bidiagonal matrix: `B g`, in the basis of the search.
    fn assemble(&mut self, steps: usize) {
        let g = self.square.vector();
        for (step, weight) in self.products[..steps].iter_mut().enumerate() {
            let next = if step + 1 < steps { self.beta[step] * g[step + 1] } else { 0.0 };
            *weight = -(self.alpha[step] * g[step] + next);
        }
        ops::subtract(self.right.view(steps), &self.products[..steps], &self.zeros, &mut self.direction);
        normalize(&mut self.direction);
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
