//! The sweeps, written once for every instruction set.
//!
//! Two rules keep a sweep at the speed of the memory. Eight basis vectors share each load of the vector, so the
//! vector costs an eighth of a load a product. And the columns are walked in blocks: a block of the vector
//! stays in the first-level cache while all basis vectors pass over it, and where a block of the basis is used
//! twice (subtract, then measure) it is still in the second-level cache the second time.
//!
//! Sums are taken lane by lane inside a block, then block by block, so the error of a long product grows with
//! the number of blocks and of lane steps, not with the number of entries.

use super::entries::{add_scaled, scaled};
use super::lanes::{Lanes, Transfer};
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Entries of the vector in a block: 16 KiB, a third of a first-level cache.
const BLOCK: usize = 2048;
/// Bytes of the basis in a block that is used twice: well inside a second-level cache. 128 KiB measured the same,
/// 512 KiB and 32 KiB 5 % slower.
const BLOCK_BYTES: usize = 256 * 1024;
/// The smallest block worth starting the loops for.
const BLOCK_LEAST: usize = 128;

/// Entries in a block for a sweep that passes twice over `count` rows.
fn block_for<T>(count: usize) -> usize {
    let entries = BLOCK_BYTES / (count.max(1) * size_of::<T>());
    (entries / BLOCK_LEAST * BLOCK_LEAST).clamp(BLOCK_LEAST, BLOCK)
}

/// Where a sweep starts. A basis as large as the cache, swept again and again from the same end, is never there when it is
/// needed; swept to and fro, its last part is still there each time.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum End {
    /// At the first column.
    Front,
    /// At the last column.
    Back,
}

impl End {
    /// The other end: where the sweep that starts here finishes.
    #[must_use]
    pub fn other(self) -> Self {
        match self {
            Self::Front => Self::Back,
            Self::Back => Self::Front,
        }
    }

    /// First columns of the blocks, `length` columns each, of `dim` columns, in the order of a sweep from this end.
    #[inline(always)]
    fn blocks(self, dim: usize, length: usize) -> impl Iterator<Item = usize> {
        let count = dim.div_ceil(length);
        (0..count).map(move |step| length * if self == Self::Front { step } else { count - 1 - step })
    }
}

/// Calls `$on` with a group size as constant until `$count` rows are done: eights, then what is left.
macro_rules! in_groups {
    ($count:expr, |$first:ident, $rows:ident, $chains:ident| $body:expr) => {{
        let mut $first = 0;
        while $first + 8 <= $count {
            const $rows: usize = 8;
            const $chains: usize = 1;
            $body;
            $first += 8;
        }
        if $first + 4 <= $count {
            const $rows: usize = 4;
            const $chains: usize = 2;
            $body;
            $first += 4;
        }
        if $first + 2 <= $count {
            const $rows: usize = 2;
            const $chains: usize = 4;
            $body;
            $first += 2;
        }
        if $first < $count {
            const $rows: usize = 1;
            const $chains: usize = 8;
            $body;
        }
    }};
}

/// Products of `R` rows with `x`, `n` entries each, in `C` independent chains a row: enough of them to hide the
/// latency of a multiply-add.
///
/// # Safety
/// Every pointer in `rows`, and `x`, points to `n` readable entries.
#[inline(always)]
#[expect(clippy::needless_range_loop, reason = "constant bounds, so that the loops unroll into registers")]
pub(super) unsafe fn dots<L: Lanes, T: Transfer, const R: usize, const C: usize>(
    lanes: L,
    rows: [*const T; R],
    x: *const f64,
    n: usize,
) -> [f64; R] {
    let mut sums = [[lanes.splat(0.0); C]; R];
    let mut at = 0;
    // SAFETY: all accesses are at `at..at + WIDTH` with `at + WIDTH <= n`, or the `n - at` last entries.
    unsafe {
        while at + C * L::WIDTH <= n {
            for chain in 0..C {
                let here = at + chain * L::WIDTH;
                let factor = lanes.load64(x.add(here));
                for row in 0..R {
                    sums[row][chain] =
                        lanes.mul_add(T::load(lanes, rows[row].add(here)), factor, sums[row][chain]);
                }
            }
            at += C * L::WIDTH;
        }
        while at + L::WIDTH <= n {
            let factor = lanes.load64(x.add(at));
            for row in 0..R {
                sums[row][0] = lanes.mul_add(T::load(lanes, rows[row].add(at)), factor, sums[row][0]);
            }
            at += L::WIDTH;
        }
        if at < n {
            let factor = lanes.load64_part(x.add(at), n - at);
            for row in 0..R {
                sums[row][0] =
                    lanes.mul_add(T::load_part(lanes, rows[row].add(at), n - at), factor, sums[row][0]);
            }
        }
    }
    sums.map(|chains| {
        let mut total = chains[0];
        for &chain in &chains[1..] {
            total = lanes.add(total, chain);
        }
        lanes.sum(total)
    })
}

/// `out = x - sum_r factors[r] rows[r]` over `n` entries; `out` may be `x`.
///
/// # Safety
/// Every pointer in `rows`, and `x`, points to `n` readable entries, `out` to `n` writable ones that overlap
/// none of `rows`.
#[inline(always)]
unsafe fn less<L: Lanes, T: Transfer, const R: usize>(
    lanes: L,
    rows: [*const T; R],
    factors: [f64; R],
    x: *const f64,
    out: *mut f64,
    n: usize,
) {
    let factors = factors.map(|factor| lanes.splat(factor));
    let mut at = 0;
    // SAFETY: as in `dots`; each entry of `x` is read before the same entry of `out` is written.
    unsafe {
        while at + L::WIDTH <= n {
            let mut value = lanes.load64(x.add(at));
            for row in 0..R {
                value = lanes.mul_sub(T::load(lanes, rows[row].add(at)), factors[row], value);
            }
            lanes.store64(out.add(at), value);
            at += L::WIDTH;
        }
        if at < n {
            let mut value = lanes.load64_part(x.add(at), n - at);
            for row in 0..R {
                value = lanes.mul_sub(T::load_part(lanes, rows[row].add(at), n - at), factors[row], value);
            }
            lanes.store64_part(out.add(at), value, n - at);
        }
    }
}

/// Adds to `h` the products of all rows with `x` over the columns `from..from + n`.
///
/// # Safety
/// `x` points to `n` readable entries and `from + n <= q.dim()`.
#[inline(always)]
unsafe fn add_dots<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    from: usize,
    x: *const f64,
    n: usize,
    h: &mut [f64],
) {
    let start = q.start();
    let stride = q.stride();
    in_groups!(q.count(), |first, R, C| {
        // SAFETY: row `first + r < count` starts at `stride (first + r)` and holds `dim >= from + n` entries.
        let sums = unsafe {
            dots::<L, T, R, C>(lanes, std::array::from_fn(|r| start.add((first + r) * stride + from)), x, n)
        };
        for (target, sum) in h[first..].iter_mut().zip(sums) {
            *target += sum;
        }
    });
}

/// `out = x - Q^T h` over the columns `from..from + n`.
///
/// # Safety
/// `x` points to `n` readable and `out` to `n` writable entries (they may be the same), `from + n <= q.dim()`.
#[inline(always)]
unsafe fn less_rows<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    h: &[f64],
    from: usize,
    x: *const f64,
    out: *mut f64,
    n: usize,
) {
    let start = q.start();
    let stride = q.stride();
    let mut source = x;
    in_groups!(q.count(), |first, R, _C| {
        let factors: [f64; R] = std::array::from_fn(|r| h[first + r]);
        // SAFETY: rows as in `add_dots`; `source` is `x` first and `out` after that.
        unsafe {
            less::<L, T, R>(
                lanes,
                std::array::from_fn(|r| start.add((first + r) * stride + from)),
                factors,
                source,
                out,
                n,
            );
        }
        source = out.cast_const();
    });
    if source == x && x != out.cast_const() {
        // No row at all. SAFETY: `n` entries each; distinct pointers come from distinct slices.
        unsafe { std::ptr::copy_nonoverlapping(x, out, n) };
    }
}

/// See [`super::Path::dot`].
#[inline(always)]
pub(super) fn dot<L: Lanes>(lanes: L, x: &[f64], y: &[f64]) -> f64 {
    assert_eq!(x.len(), y.len(), "vectors of equal length");
    let mut total = 0.0;
    for (a, b) in x.chunks(BLOCK).zip(y.chunks(BLOCK)) {
        // SAFETY: both chunks hold `a.len()` entries.
        total += unsafe { dots::<L, f64, 1, 8>(lanes, [a.as_ptr()], b.as_ptr(), a.len()) }[0];
    }
    total
}

/// See [`super::Path::project`].
#[inline(always)]
pub(super) fn project<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    v: &[f64],
    h: &mut [f64],
    end: End,
) -> f64 {
    assert!(v.len() == q.dim() && h.len() == q.count(), "shapes of a projection");
    h.fill(0.0);
    let mut squares = 0.0;
    let length = block_for::<T>(q.count());
    for from in end.blocks(v.len(), length) {
        let block = &v[from..(from + length).min(q.dim())];
        // SAFETY: `block` holds its length and lies inside `v`, which is as long as a row.
        unsafe {
            squares += dots::<L, f64, 1, 8>(lanes, [block.as_ptr()], block.as_ptr(), block.len())[0];
            add_dots(lanes, q, from, block.as_ptr(), block.len(), h);
        }
    }
    squares
}

/// Where a subtraction reads: another vector, or its own target.
#[derive(Clone, Copy)]
pub(super) enum Source<'a> {
    /// A vector as long as the target.
    Vector(&'a [f64]),
    /// The target itself.
    Target,
}

/// See [`super::Path::subtract`] and [`super::Path::subtract_measured`]; measures where `s` is given.
#[inline(always)]
pub(super) fn subtract<L: Lanes, T: Scalar>(
    lanes: L,
    q: Rows<'_, T>,
    h: &[f64],
    source: Source<'_>,
    w: &mut [f64],
    mut s: Option<&mut [f64]>,
    end: End,
) -> f64 {
    assert!(w.len() == q.dim() && h.len() == q.count(), "shapes of a subtraction");
    if let Source::Vector(v) = source {
        assert_eq!(v.len(), w.len(), "vectors of equal length");
    }
    if let Some(s) = &mut s {
        assert_eq!(s.len(), q.count(), "a coefficient a row");
        s.fill(0.0);
    }
    let block = block_for::<T>(q.count());
    let mut squares = 0.0;
    for from in end.blocks(w.len(), block) {
        let here = &mut w[from..(from + block).min(q.dim())];
        let (out, n) = (here.as_mut_ptr(), here.len());
        let x = match source {
            Source::Vector(v) => v[from..from + n].as_ptr(),
            Source::Target => out.cast_const(),
        };
        // SAFETY: `x` and `out` each hold `n` entries, and `from + n <= dim`.
        unsafe {
            less_rows(lanes, q, h, from, x, out, n);
            squares += dots::<L, f64, 1, 8>(lanes, [out.cast_const()], out, n)[0];
            if let Some(s) = &mut s {
                add_dots(lanes, q, from, out, n, s);
            }
        }
    }
    squares
}

/// See [`super::Path::reflect`] and [`super::Path::reflect_along`].
#[inline(always)]
pub(super) fn reflect<L: Lanes, T: Scalar>(
    lanes: L,
    rows: &mut [T],
    stride: usize,
    u: &[f64],
    along: &[f64],
    extra: &[f64],
    end: End,
) {
    assert!(stride >= extra.len() && !u.is_empty() && along.len() == u.len(), "shapes of a reflection");
    let (dim, count) = (extra.len(), u.len() - 1);
    assert!(count == 0 || rows.len() >= (count - 1) * stride + dim, "rows of a reflection");
    // Left unset until written: clearing it would cost more than a short row.
    let mut g = [const { std::mem::MaybeUninit::<f64>::uninit() }; BLOCK];
    let g = g.as_mut_ptr().cast::<f64>();
    let block = block_for::<T>(count);
    for from in end.blocks(dim, block) {
        let n = block.min(dim - from);
        // g = -(a_last extra + sum_i a_i row_i), so that row_i + 2 u_i g is the reflected row.
        // SAFETY: `g` holds `BLOCK >= n` entries, written by `scaled` before they are read; `extra` has `n` from
        // `from` on.
        unsafe { scaled(lanes, -along[count], extra.as_ptr().add(from), g, n) };
        if let Some(q) = Rows::new(rows, stride, count, dim) {
            // SAFETY: as above, and `from + n <= dim`.
            unsafe { less_rows(lanes, q, &along[..count], from, g.cast_const(), g, n) };
        }
        for (index, &entry) in u[..count].iter().enumerate() {
            let row = rows[index * stride + from..][..n].as_mut_ptr();
            // SAFETY: `row` and `g` hold `n` entries.
            unsafe { add_scaled(lanes, 2.0 * entry, g.cast_const(), row, n) };
        }
    }
}
