//! The sweeps, as plain loops.

use crate::rows::Rows;
use crate::scalar::Scalar;

/// Sum of products of two vectors of equal length.
#[must_use]
pub fn dot(x: &[f64], y: &[f64]) -> f64 {
    x.iter().zip(y).map(|(a, b)| a * b).sum()
}

/// Sum of squares; not guarded against overflow.
#[must_use]
pub fn norm_squared(x: &[f64]) -> f64 {
    dot(x, x)
}

/// `h = Q v`; returns `v . v`. One read of `Q`.
pub fn project<T: Scalar>(q: Rows<'_, T>, v: &[f64], h: &mut [f64]) -> f64 {
    for (index, row) in q.iter().enumerate() {
        h[index] = row.iter().zip(v).map(|(a, b)| a.to_f64() * b).sum();
    }
    norm_squared(v)
}

/// `w = v - Q^T h`; returns `w . w`. One read of `Q`.
pub fn subtract<T: Scalar>(q: Rows<'_, T>, h: &[f64], v: &[f64], w: &mut [f64]) -> f64 {
    w.copy_from_slice(v);
    for (index, row) in q.iter().enumerate() {
        for (target, value) in w.iter_mut().zip(row) {
            *target -= h[index] * value.to_f64();
        }
    }
    norm_squared(w)
}

/// `w = v - Q^T h` and `s = Q w`; returns `w . w`. One read of `Q` from memory, one from cache.
pub fn subtract_measured<T: Scalar>(
    q: Rows<'_, T>,
    h: &[f64],
    v: &[f64],
    w: &mut [f64],
    s: &mut [f64],
) -> f64 {
    subtract(q, h, v, w);
    project(q, w, s)
}

/// `w -= Q^T h` and `s = Q w`; returns `w . w`.
pub fn subtract_measured_in_place<T: Scalar>(q: Rows<'_, T>, h: &[f64], w: &mut [f64], s: &mut [f64]) -> f64 {
    for (index, row) in q.iter().enumerate() {
        for (target, value) in w.iter_mut().zip(row) {
            *target -= h[index] * value.to_f64();
        }
    }
    project(q, w, s)
}

/// `target = factor * source`, rounded to the stored type.
pub fn scale_into<T: Scalar>(factor: f64, source: &[f64], target: &mut [T]) {
    for (out, value) in target.iter_mut().zip(source) {
        *out = T::from_f64(factor * value);
    }
}

/// Rotates two rows in their plane: `(x, y) <- (c x + s y, c y - s x)`.
pub fn rotate<T: Scalar>(x: &mut [T], y: &mut [T], c: f64, s: f64) {
    for (a, b) in x.iter_mut().zip(y) {
        let (first, second) = (a.to_f64(), b.to_f64());
        *a = T::from_f64(c * first + s * second);
        *b = T::from_f64(c * second - s * first);
    }
}

/// Applies the reflection `I - 2 u u^T` (`u` a unit vector over the `count` rows and one more, `extra`) to the
/// rows: row `i` loses `2 u_i g`, where `g = sum_i u_i row_i + u_last extra`. `extra` is left as it is. The row
/// length is that of `extra`. One read and one write of the rows.
pub fn reflect<T: Scalar>(rows: &mut [T], stride: usize, count: usize, u: &[f64], extra: &[f64]) {
    for column in 0..extra.len() {
        let mut g = u[count] * extra[column];
        for index in 0..count {
            g += u[index] * rows[index * stride + column].to_f64();
        }
        for index in 0..count {
            let entry = &mut rows[index * stride + column];
            *entry = T::from_f64(entry.to_f64() - 2.0 * u[index] * g);
        }
    }
}
