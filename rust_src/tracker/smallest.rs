//! The direction to give up: the right singular vector of the bordered factor that belongs to its smallest value.
//!
//! Two triangular solves apply the inverse of `R^T R`. Plain inverse iteration is slow where the two smallest values are
//! close, which is where a tracker lives: the weakest guard direction and the new one both carry noise. The same
//! solves therefore build a bidiagonal matrix (Golub & Kahan, J. SIAM Numer. Anal. B 2 (1965) 205-224, applied to
//! the inverse), whose largest triplet converges in a handful of steps and, after as many steps as there are
//! rows, is exact. The step count is decided by the residual, never fixed.

use super::factor::Factor;
use super::tridiagonal::Tridiagonal;

/// Cosine left between the image of the direction given up and that of any direction kept. What it costs is
/// of second order, its square: far below rounding.
const COUPLING: f64 = 1e-11;
/// A diagonal entry this far below the largest counts as that much: the direction is null either way.
const NULL: f64 = 1e-30;

/// Workspace of the search.
#[derive(Clone, Debug)]
pub(super) struct Smallest {
    limit: usize,
    /// Reciprocals of the diagonal.
    pivots: Vec<f64>,
    /// The largest diagonal entry: the inverse is scaled by it, so that its square stays in range.
    scale: f64,
    /// Orthonormal vectors of the search, one a step: in the space of the images, and of the directions.
    left: Vec<f64>,
    right: Vec<f64>,
    /// The bidiagonal matrix.
    alpha: Vec<f64>,
    beta: Vec<f64>,
    square: Tridiagonal,
    work: Vec<f64>,
    direction: Vec<f64>,
}

impl Smallest {
    /// Workspace for factors of at most `limit` rows.
    pub(super) fn with_room(limit: usize) -> Self {
        Self {
            limit,
            pivots: vec![0.0; limit],
            scale: 1.0,
            left: vec![0.0; limit * limit],
            right: vec![0.0; limit * limit],
            alpha: vec![0.0; limit],
            beta: vec![0.0; limit],
            square: Tridiagonal::with_room(limit),
            work: vec![0.0; limit],
            direction: vec![0.0; limit],
        }
    }

    /// The unit vector found last.
    pub(super) fn direction(&self, size: usize) -> &[f64] {
        &self.direction[..size]
    }

    /// Finds the direction of the smallest singular value of `factor`. About `2 k^2` flops a step, and some five to
    /// fifteen steps.
    pub(super) fn find(&mut self, factor: &Factor) {
        let size = factor.size();
        self.square.clear();
        self.prepare(factor);
        self.start(factor);
        let mut steps = 0;
        loop {
            // alpha u = A v - beta u_before, with A the inverse.
            let (done, here) = self.right.split_at_mut(steps * self.limit);
            let u = &mut here[..size];
            u.copy_from_slice(&self.left[steps * self.limit..][..size]);
            solve(factor, &self.pivots, self.scale, u);
            orthogonalize(u, done, self.limit);
            let alpha = normalize(u);
            self.alpha[steps] = alpha;
            let before = if steps == 0 { 0.0 } else { self.beta[steps - 1] };
            // beta v_next = A^T u - alpha v.
            let v = &mut self.work[..size];
            v.copy_from_slice(u);
            solve_transposed(factor, &self.pivots, self.scale, v);
            steps += 1;
            orthogonalize(v, &self.left[..steps * self.limit], self.limit);
            let beta = normalize(v);
            self.beta[steps - 1] = beta;
            self.square.push(alpha * alpha + before * before, alpha * beta);
            let largest = self.square.largest();
            let last = self.square.vector()[steps - 1];
            let residual = alpha * beta * last.abs();
            if steps == size || residual <= COUPLING * largest || alpha == 0.0 || beta == 0.0 {
                break;
            }
            self.left[steps * self.limit..][..size].copy_from_slice(v);
        }
        self.assemble(size, steps);
    }

    /// Reciprocals of the diagonal, and the scale.
    fn prepare(&mut self, factor: &Factor) {
        let size = factor.size();
        let largest = (0..size).map(|row| factor.tail(row)[0].abs()).fold(f64::MIN_POSITIVE, f64::max);
        self.scale = largest;
        for (row, pivot) in self.pivots[..size].iter_mut().enumerate() {
            let entry = factor.tail(row)[0];
            let least = NULL * largest;
            *pivot = if entry.abs() < least { least } else { entry }.recip();
        }
    }

    /// The first vector: the solution of `R^T v = (+-1, ..., +-1)` with each sign chosen to make it grow, as in
    /// a condition estimate (Cline, Moler, Stewart, Wilkinson, SIAM J. Numer. Anal. 16 (1979) 368-375).
    fn start(&mut self, factor: &Factor) {
        let size = factor.size();
        let v = &mut self.left[..size];
        v.fill(0.0);
        for row in 0..size {
            // So far v holds the negated sums.
            let value = (self.scale.copysign(v[row]) + v[row]) * self.pivots[row];
            v[row] = value;
            for (out, entry) in v[row + 1..].iter_mut().zip(&factor.tail(row)[1..]) {
                *out -= value * entry;
            }
        }
        normalize(v);
    }

    /// The direction from the vector of the bidiagonal matrix: `B g`, in the basis of the search.
    fn assemble(&mut self, size: usize, steps: usize) {
        let g = self.square.vector();
        let direction = &mut self.direction[..size];
        direction.fill(0.0);
        for step in 0..steps {
            let next = if step + 1 < steps { self.beta[step] * g[step + 1] } else { 0.0 };
            let weight = self.alpha[step] * g[step] + next;
            for (out, entry) in direction.iter_mut().zip(&self.right[step * self.limit..]) {
                *out += weight * entry;
            }
        }
        normalize(direction);
    }
}

/// `R z = scale y` in place.
fn solve(factor: &Factor, pivots: &[f64], scale: f64, x: &mut [f64]) {
    for row in (0..x.len()).rev() {
        let sum: f64 = factor.tail(row)[1..].iter().zip(&x[row + 1..]).map(|(a, b)| a * b).sum();
        x[row] = (scale * x[row] - sum) * pivots[row];
    }
}

/// `R^T y = scale x` in place.
fn solve_transposed(factor: &Factor, pivots: &[f64], scale: f64, x: &mut [f64]) {
    for entry in &mut *x {
        *entry *= scale;
    }
    for row in 0..x.len() {
        let value = x[row] * pivots[row];
        x[row] = value;
        for (out, entry) in x[row + 1..].iter_mut().zip(&factor.tail(row)[1..]) {
            *out -= value * entry;
        }
    }
}

/// Takes off what lies along each of the vectors in `basis`, one after the other.
fn orthogonalize(x: &mut [f64], basis: &[f64], stride: usize) {
    for vector in basis.chunks_exact(stride) {
        let product: f64 = vector.iter().zip(&*x).map(|(a, b)| a * b).sum();
        for (out, entry) in x.iter_mut().zip(vector) {
            *out -= product * entry;
        }
    }
}

/// Scales to norm 1 and returns the norm; zero stays zero.
fn normalize(x: &mut [f64]) -> f64 {
    let norm = x.iter().map(|entry| entry * entry).sum::<f64>().sqrt();
    if norm > 0.0 {
        let scale = norm.recip();
        for entry in x {
            *entry *= scale;
        }
    }
    norm
}
