//! From a path to code compiled for it: one stamp a sweep.

use super::path::{Path, Set};
use super::sweep::{End, Source};
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Every sweep that is stamped, under one roof: the stamped names are the same.
mod sweeps {
    pub(super) use super::super::block::{combine_block, project_block, subtract_block};
    pub(super) use super::super::entries::{normalize_into, rotate, rotate_chain, scale_into};
    pub(super) use super::super::sweep::{dot, project, reflect, subtract};
    pub(super) use super::super::triangle::invert_triangle;
}

/// Stamps a method of [`Path`] and a free function on the current path. Each instruction set gets its own copy
/// of the sweep, compiled with its features on.
macro_rules! stamp {
    ($($(#[$doc:meta])* fn $name:ident $(<$T:ident>)? ($($arg:ident: $type:ty),*) $(-> $out:ty)?
        = $sweep:ident($($pass:expr),*);)*) => {
        impl Path {$(
            $(#[$doc])*
            ///
            /// # Panics
            /// Where the shapes do not match.
            #[inline]
            pub fn $name $(<$T: Scalar>)? (self, $($arg: $type),*) $(-> $out)? {
                match self.0 {
                    #[cfg(target_arch = "x86_64")]
                    Set::Avx512(lanes) => {
                        #[target_feature(enable = "avx512f")]
                        fn on $(<$T: Scalar>)? (lanes: super::avx512::Avx512, $($arg: $type),*) $(-> $out)? {
                            sweeps::$sweep(lanes, $($pass),*)
                        }
                        // SAFETY: `lanes` proves that the processor has the feature.
                        unsafe { on(lanes, $($arg),*) }
                    }
                    #[cfg(target_arch = "x86_64")]
                    Set::Avx2(lanes) => {
                        #[target_feature(enable = "avx2,fma")]
                        fn on $(<$T: Scalar>)? (lanes: super::avx2::Avx2, $($arg: $type),*) $(-> $out)? {
                            sweeps::$sweep(lanes, $($pass),*)
                        }
                        // SAFETY: `lanes` proves that the processor has both features.
                        unsafe { on(lanes, $($arg),*) }
                    }
                    #[cfg(target_arch = "aarch64")]
                    Set::Neon(lanes) => sweeps::$sweep(lanes, $($pass),*),
                    Set::Portable(lanes) => sweeps::$sweep(lanes, $($pass),*),
                }
            }
        )*}

        $(
            $(#[$doc])*
            ///
            /// # Panics
            /// Where the shapes do not match.
            #[inline]
            pub fn $name $(<$T: Scalar>)? ($($arg: $type),*) $(-> $out)? {
                Path::current().$name($($arg),*)
            }
        )*
    };
}

stamp! {
    /// Sum of products of two vectors of equal length.
    fn dot(x: &[f64], y: &[f64]) -> f64 = dot(x, y);

    /// Sum of squares; not guarded against overflow.
    fn norm_squared(x: &[f64]) -> f64 = dot(x, x);

    /// `h = Q v`; returns `v . v`. One read of `Q`, `2 rank dim` flops.
    fn project<T>(q: Rows<'_, T>, v: &[f64], h: &mut [f64]) -> f64 = project(q, v, h, End::Front);

    /// As [`project`], from either end.
    fn project_from<T>(end: End, q: Rows<'_, T>, v: &[f64], h: &mut [f64]) -> f64 = project(q, v, h, end);

    /// `w = v - Q^T h`; returns `w . w`. One read of `Q`, `2 rank dim` flops.
    fn subtract<T>(q: Rows<'_, T>, h: &[f64], v: &[f64], w: &mut [f64]) -> f64
        = subtract(q, h, Source::Vector(v), w, None, End::Back);

    /// `w = v - Q^T h` and `s = Q w`; returns `w . w`. One read of `Q` from memory and one from cache,
    /// `4 rank dim` flops.
    fn subtract_measured<T>(q: Rows<'_, T>, h: &[f64], v: &[f64], w: &mut [f64], s: &mut [f64]) -> f64
        = subtract(q, h, Source::Vector(v), w, Some(s), End::Back);

    /// As [`subtract_measured`], which starts at the back, from either end.
    fn subtract_measured_from<T>(
        end: End,
        q: Rows<'_, T>,
        h: &[f64],
        v: &[f64],
        w: &mut [f64],
        s: &mut [f64]
    ) -> f64 = subtract(q, h, Source::Vector(v), w, Some(s), end);

    /// `w -= Q^T h` and `s = Q w`; returns `w . w`. As [`subtract_measured`].
    fn subtract_measured_in_place<T>(q: Rows<'_, T>, h: &[f64], w: &mut [f64], s: &mut [f64]) -> f64
        = subtract(q, h, Source::Target, w, Some(s), End::Back);

    /// `H = V Q^T` for `count` vectors, one after another in `v`; `h` has a row a vector. One read of `Q`.
    fn project_block<T>(q: Rows<'_, T>, v: &[f64], count: usize, h: &mut [f64]) = project_block(q, v, count, h);

    /// `W = V - H Q` and `S = W Q^T` for `count` vectors. One read of `Q` from memory, the rest from cache.
    fn subtract_block<T>(q: Rows<'_, T>, h: &[f64], v: &[f64], w: &mut [f64], count: usize, s: &mut [f64])
        = subtract_block(q, h, Source::Vector(v), w, count, s);

    /// `W -= H Q` and `S = W Q^T` for `count` vectors.
    fn subtract_block_in_place<T>(q: Rows<'_, T>, h: &[f64], w: &mut [f64], count: usize, s: &mut [f64])
        = subtract_block(q, h, Source::Target, w, count, s);

    /// `W -= H Q` for `count` vectors, and no more: a product of matrices. One read of `Q`.
    fn combine_block<T>(q: Rows<'_, T>, h: &[f64], w: &mut [f64], count: usize) = combine_block(q, h, w, count);

    /// `target = factor source`, rounded to the stored type.
    fn scale_into<T>(factor: f64, source: &[f64], target: &mut [T]) = scale_into(factor, source, target);

    /// `target = source / norm`, rounded to the stored type.
    fn normalize_into<T>(norm: f64, source: &[f64], target: &mut [T]) = normalize_into(norm, source, target);

    /// Rotates two rows in their plane: `(x, y) <- (c x + s y, c y - s x)`.
    fn rotate<T>(x: &mut [T], y: &mut [T], c: f64, s: f64) = rotate(x, y, c, s);

    /// Rotation `i` turns rows `first + i` and `first + i + 1` of `dim` entries, in order from the top: one read
    /// and one write of those rows.
    fn rotate_chain<T>(rows: &mut [T], stride: usize, dim: usize, first: usize, rotations: &[(f64, f64)])
        = rotate_chain(rows, stride, dim, first, rotations);

    /// Applies the reflection `I - 2 u u^T`, `u` a unit vector over the first rows and one more, `extra`: row `i`
    /// loses `2 u_i g` with `g = sum_i u_i row_i + u_last extra`. `extra`, as long as a row, stays as it is. One
    /// read of the rows from memory and one from cache, one write, 4 flops an entry.
    fn reflect<T>(rows: &mut [T], stride: usize, u: &[f64], extra: &[f64])
        = reflect(rows, stride, u, u, extra, End::Front);

    /// As `reflect`, with `g = sum_i along_i row_i + along_last extra`: the same reflection where `extra` still holds
    /// some of the rows, or is no unit vector, and `along` makes up for it. From either end.
    fn reflect_along<T>(
        end: End,
        rows: &mut [T],
        stride: usize,
        u: &[f64],
        along: &[f64],
        extra: &[f64]
    ) = reflect(rows, stride, u, along, extra, end);

    /// `inverse = scale R^-1` for an upper triangle `R` with the diagonal `pivots` and the rest, `stride` apart, in
    /// `triangle`; returns the longest row's index. Nothing is written left of the diagonal's register: zeros that are
    /// there stay. `size^3 / 3` flops.
    fn invert_triangle(
        triangle: &[f64],
        stride: usize,
        pivots: &[f64],
        scale: f64,
        inverse: &mut [f64],
        inverse_stride: usize
    ) -> usize = invert_triangle(triangle, stride, pivots, scale, inverse, inverse_stride);
}
