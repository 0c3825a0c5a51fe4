//! The upper triangular root `U` of a small positive matrix, `N = U U^T`, and its inverse: rows of Gram matrix `N` times
//! the inverse are orthonormal (the triangular step of `CholeskyQR`: Yamamoto, Nakatsukasa, Yanagisawa, Fukaya, Electron.
//! Trans. Numer. Anal. 44 (2015) 306-326).

use super::factor::dot;

/// Pivot, of a matrix near the identity, below which the rows are too far from orthonormal to be mended.
const LEAST_PIVOT: f64 = 0.25;

/// Takes the root of `square`, row-major and of unit scale, of which the upper triangle is read and overwritten; false, and
/// nothing to be used, where it is far from the identity. `size^3 / 3` flops.
pub(super) fn take(square: &mut [f64], size: usize) -> bool {
    for column in (0..size).rev() {
        let (above, here) = square.split_at_mut(column * size);
        let tail = &here[column + 1..size];
        let pivot = here[column] - dot(tail, tail);
        // Not a number fails too.
        if !(pivot > LEAST_PIVOT && pivot < LEAST_PIVOT.recip()) {
            return false;
        }
        let root = pivot.sqrt();
        for row in above.chunks_exact_mut(size) {
            row[column] = (row[column] - dot(&row[column + 1..], tail)) / root;
        }
        here[column] = root;
    }
    true
}

/// Leaves the inverse of the upper triangle `root`, times `sign`, in `inverse`, zeros below its diagonal. `size^3 / 3`
/// flops.
pub(super) fn invert(root: &[f64], size: usize, sign: f64, inverse: &mut [f64]) {
    inverse.fill(0.0);
    for row in (0..size).rev() {
        let (head, below) = inverse.split_at_mut((row + 1) * size);
        let here = &mut head[row * size..];
        let reciprocal = root[row * size + row].recip();
        here[row] = sign * reciprocal;
        for (&entry, solved) in
            root[row * size + row + 1..][..size - row - 1].iter().zip(below.chunks_exact(size))
        {
            let share = entry * reciprocal;
            for (out, value) in here[row + 1..].iter_mut().zip(&solved[row + 1..]) {
                *out -= share * value;
            }
        }
    }
}
