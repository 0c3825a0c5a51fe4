//! The sweeps for many vectors at once, at matrix-matrix speed.
//!
//! A tile of the answer stays in registers while the basis streams past: each load of a basis entry serves
//! several vectors, each load of a vector entry several basis rows. Tiles are sized to the register file: 32
//! registers with AVX-512, 16 elsewhere.

use super::lanes::{Lanes, Transfer};
use super::sweep::{Source, dots};
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Columns in a block: 16 vectors and 8 basis rows of it stay in the second-level cache.
const COLUMNS: usize = 1024;
/// Basis rows subtracted while a tile of the residual stays in registers.
const DEPTH: usize = 16;

/// Products of `R` rows with `V` vectors over `n` entries.
///
/// # Safety
/// Every pointer points to `n` readable entries.
#[inline(always)]
unsafe fn products<L: Lanes, T: Transfer, const R: usize, const V: usize>(
    lanes: L,
    rows: [*const T; R],
    vectors: [*const f64; V],
    n: usize,
) -> [[f64; R]; V] {
    let mut sums = [[lanes.splat(0.0); R]; V];
    let mut at = 0;
    // SAFETY: all accesses are at `at..at + WIDTH <= n`, or the `n - at` last entries.
    unsafe {
        while at + L::WIDTH <= n {
            let q: [L::Register; R] = std::array::from_fn(|row| T::load(lanes, rows[row].add(at)));
            for vector in 0..V {
                let x = lanes.load64(vectors[vector].add(at));
                for row in 0..R {
                    sums[vector][row] = lanes.mul_add(q[row], x, sums[vector][row]);
                }
            }
            at += L::WIDTH;
        }
        if at < n {
            let rest = n - at;
            let q: [L::Register; R] = std::array::from_fn(|row| T::load_part(lanes, rows[row].add(at), rest));
            for vector in 0..V {
                let x = lanes.load64_part(vectors[vector].add(at), rest);
                for row in 0..R {
                    sums[vector][row] = lanes.mul_add(q[row], x, sums[vector][row]);
                }
            }
        }
    }
    sums.map(|of_vector| of_vector.map(|sum| lanes.sum(sum)))
}

/// `out_v = x_v - sum_r h[v][r] rows[r]` over `C` registers of columns from `at` on, for `V` vectors and
/// `depth` rows `stride` apart.
///
/// # Safety
/// `x` and `out` point to rows of `x_stride` and `out_stride` entries, `V` of them, `rows` to `depth` of them,
/// each with `C WIDTH` entries from its start.
#[inline(always)]
#[expect(clippy::needless_range_loop, reason = "constant bounds, so that the loops unroll into registers")]
unsafe fn less_tile<L: Lanes, T: Transfer, const V: usize, const C: usize>(
    lanes: L,
    rows: *const T,
    stride: usize,
    depth: usize,
    h: [*const f64; V],
    x: [*const f64; V],
    out: [*mut f64; V],
) {
    // SAFETY: the caller vouches for all entries touched.
    unsafe {
        let mut values: [[L::Register; C]; V] = std::array::from_fn(|vector| {
            std::array::from_fn(|column| lanes.load64(x[vector].add(column * L::WIDTH)))
        });
        for row in 0..depth {
            let q: [L::Register; C] =
                std::array::from_fn(|column| T::load(lanes, rows.add(row * stride + column * L::WIDTH)));
            for vector in 0..V {
                let factor = lanes.splat(*h[vector].add(row));
                for column in 0..C {
                    values[vector][column] = lanes.mul_sub(q[column], factor, values[vector][column]);
                }
            }
        }
        for vector in 0..V {
            for column in 0..C {
                lanes.store64(out[vector].add(column * L::WIDTH), values[vector][column]);
            }
        }
    }
}

/// Vectors of equal length, one after another.
#[derive(Clone, Copy)]
struct Vectors {
    start: *const f64,
    dim: usize,
}

impl Vectors {
    /// Where entry `from` of vector `index` is.
    ///
    /// # Safety
    /// There are more than `index` vectors, of at least `from` entries.
    #[inline(always)]
    unsafe fn at(self, index: usize, from: usize) -> *const f64 {
        // SAFETY: the caller vouches for it.
        unsafe { self.start.add(index * self.dim + from) }
    }
}

/// Adds to `h`, `count` rows of `q.count()`, the products of all vectors with all rows over the columns
/// `from..from + n`.
///
/// # Safety
/// `x` holds `count` vectors, and `from + n <= dim`.
#[inline(always)]
unsafe fn add_products<L: Lanes, T: Scalar, const R: usize, const V: usize>(
    lanes: L,
    q: Rows<'_, T>,
    from: usize,
    n: usize,
    x: Vectors,
    count: usize,
    h: &mut [f64],
) {
    let (start, stride, rank) = (q.start(), q.stride(), q.count());
    let whole = count / V * V;
    // SAFETY: rows below `rank` and vectors below `count`, `n` entries from `from` on each.
    unsafe {
        for first in (0..rank).step_by(R) {
            let rows = R.min(rank - first);
            if rows == R {
                let tile: [*const T; R] = std::array::from_fn(|row| start.add((first + row) * stride + from));
                for vector in (0..whole).step_by(V) {
                    let sums = products::<L, T, R, V>(
                        lanes,
                        tile,
                        std::array::from_fn(|v| x.at(vector + v, from)),
                        n,
                    );
                    for (v, of_vector) in sums.iter().enumerate() {
                        for (target, sum) in h[(vector + v) * rank + first..].iter_mut().zip(of_vector) {
                            *target += sum;
                        }
                    }
                }
                for vector in whole..count {
                    let sums = dots::<L, T, R, 1>(lanes, tile, x.at(vector, from), n);
                    for (target, sum) in h[vector * rank + first..].iter_mut().zip(sums) {
                        *target += sum;
                    }
                }
            } else {
                for row in first..rank {
                    for vector in 0..count {
                        let tile = [start.add(row * stride + from)];
                        h[vector * rank + row] += dots::<L, T, 1, 4>(lanes, tile, x.at(vector, from), n)[0];
                    }
                }
            }
        }
    }
}

/// `out = x - H Q` over the columns `from..from + n`, vector by vector; `out` may be `x`.
///
/// # Safety
/// `x` and `out` hold `count` vectors, `h` has `count` rows of `q.count()`, and `from + n <= dim`.
#[inline(always)]
#[expect(clippy::too_many_arguments, reason = "the shape of a block")]
unsafe fn less_products<L: Lanes, T: Scalar, const V: usize, const C: usize>(
    lanes: L,
    q: Rows<'_, T>,
    from: usize,
    n: usize,
    h: &[f64],
    x: Vectors,
    out: *mut f64,
    count: usize,
) {
    let (start, stride, rank, dim) = (q.start(), q.stride(), q.count(), q.dim());
    let width = C * L::WIDTH;
    let whole = n / width * width;
    let mut source = x;
    // SAFETY: rows below `rank`, vectors below `count`, columns below `from + n <= dim`.
    unsafe {
        for first in (0..rank).step_by(DEPTH) {
            let depth = DEPTH.min(rank - first);
            let rows = start.add(first * stride + from);
            let mut vector = 0;
            while vector < count {
                let wide = vector + V <= count;
                let mut column = 0;
                while column < whole {
                    let here = from + column;
                    if wide {
                        less_tile::<L, T, V, C>(
                            lanes,
                            rows.add(column),
                            stride,
                            depth,
                            std::array::from_fn(|v| h.as_ptr().add((vector + v) * rank + first)),
                            std::array::from_fn(|v| source.at(vector + v, here)),
                            std::array::from_fn(|v| out.add((vector + v) * dim + here)),
                        );
                    } else {
                        less_tile::<L, T, 1, C>(
                            lanes,
                            rows.add(column),
                            stride,
                            depth,
                            [h.as_ptr().add(vector * rank + first)],
                            [source.at(vector, here)],
                            [out.add(vector * dim + here)],
                        );
                    }
                    column += width;
                }
                let end = if wide { vector + V } else { vector + 1 };
                for v in vector..end {
                    for column in (whole..n).step_by(L::WIDTH) {
                        let here = from + column;
                        let rest = L::WIDTH.min(n - column);
                        less_rest(
                            lanes,
                            rows.add(column),
                            stride,
                            &h[v * rank + first..][..depth],
                            source.at(v, here),
                            out.add(v * dim + here),
                            rest,
                        );
                    }
                }
                vector = end;
            }
            source = Vectors { start: out.cast_const(), dim };
        }
    }
}

/// The last `n <= WIDTH` columns of one vector.
///
/// # Safety
/// `n` entries behind `x`, `out` and the start of each row.
#[inline(always)]
unsafe fn less_rest<L: Lanes, T: Transfer>(
    lanes: L,
    rows: *const T,
    stride: usize,
    h: &[f64],
    x: *const f64,
    out: *mut f64,
    n: usize,
) {
    // SAFETY: the caller vouches for `n` entries each; a full register is loaded only where `n` is one.
    unsafe {
        let full = n == L::WIDTH;
        let mut value = if full { lanes.load64(x) } else { lanes.load64_part(x, n) };
        for (row, &factor) in h.iter().enumerate() {
            let at = rows.add(row * stride);
            let q = if full { T::load(lanes, at) } else { T::load_part(lanes, at, n) };
            value = lanes.mul_sub(q, lanes.splat(factor), value);
        }
        if full {
            lanes.store64(out, value);
        } else {
            lanes.store64_part(out, value, n);
        }
    }
}

/// See [`super::Path::project_block`].
#[inline(always)]
pub(super) fn project_block<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    v: &[f64],
    count: usize,
    h: &mut [f64],
) {
    let dim = q.dim();
    assert!(v.len() == count * dim && h.len() == count * q.count(), "shapes of a block");
    h.fill(0.0);
    let x = Vectors { start: v.as_ptr(), dim };
    for from in (0..dim).step_by(COLUMNS) {
        let n = COLUMNS.min(dim - from);
        // SAFETY: shapes asserted above, and `from + n <= dim`.
        unsafe {
            if L::WIDTH == 8 {
                add_products::<L, T, 4, 4>(lanes, q, from, n, x, count, h);
            } else {
                add_products::<L, T, 2, 4>(lanes, q, from, n, x, count, h);
            }
        }
    }
}

/// See [`super::Path::subtract_block`].
#[inline(always)]
pub(super) fn subtract_block<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    h: &[f64],
    source: Source<'_>,
    w: &mut [f64],
    count: usize,
    s: &mut [f64],
) {
    let dim = q.dim();
    assert!(
        w.len() == count * dim && h.len() == count * q.count() && s.len() == h.len(),
        "shapes of a block"
    );
    if let Source::Vector(v) = source {
        assert_eq!(v.len(), w.len(), "blocks of equal shape");
        if q.count() == 0 {
            w.copy_from_slice(v);
        }
    }
    s.fill(0.0);
    let out = w.as_mut_ptr();
    let x = match source {
        Source::Vector(v) => Vectors { start: v.as_ptr(), dim },
        Source::Target => Vectors { start: out.cast_const(), dim },
    };
    let residual = Vectors { start: out.cast_const(), dim };
    for from in (0..dim).step_by(COLUMNS).rev() {
        let n = COLUMNS.min(dim - from);
        // SAFETY: shapes asserted above, and `from + n <= dim`.
        unsafe {
            if L::WIDTH == 8 {
                less_products::<L, T, 8, 3>(lanes, q, from, n, h, x, out, count);
                add_products::<L, T, 4, 4>(lanes, q, from, n, residual, count, s);
            } else {
                less_products::<L, T, 4, 2>(lanes, q, from, n, h, x, out, count);
                add_products::<L, T, 2, 4>(lanes, q, from, n, residual, count, s);
            }
        }
    }
}

/// See [`super::Path::combine_block`].
#[inline(always)]
pub(super) fn combine_block<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    h: &[f64],
    w: &mut [f64],
    count: usize,
) {
    let dim = q.dim();
    assert!(w.len() == count * dim && h.len() == count * q.count(), "shapes of a block");
    let out = w.as_mut_ptr();
    let x = Vectors { start: out.cast_const(), dim };
    for from in (0..dim).step_by(COLUMNS) {
        let n = COLUMNS.min(dim - from);
        // SAFETY: shapes asserted above, and `from + n <= dim`.
        unsafe {
            if L::WIDTH == 8 {
                less_products::<L, T, 8, 3>(lanes, q, from, n, h, x, out, count);
            } else {
                less_products::<L, T, 4, 2>(lanes, q, from, n, h, x, out, count);
            }
        }
    }
}
