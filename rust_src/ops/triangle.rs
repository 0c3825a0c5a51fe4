//! The inverse of a small triangle: short rows, so the loops are bound by what starts them and not by memory.

use super::lanes::{Lanes, MAX_WIDTH};

/// A one with zeros around it: loaded so many entries before it, the unit vector of any lane.
const UNIT: [f64; 2 * MAX_WIDTH - 1] = {
    let mut entries = [0.0; 2 * MAX_WIDTH - 1];
    entries[MAX_WIDTH - 1] = 1.0;
    entries
};

/// See [`super::Path::invert_triangle`].
#[inline(always)]
pub(super) fn invert_triangle<L: Lanes>(
    lanes: L,
    triangle: &[f64],
    stride: usize,
    pivots: &[f64],
    scale: f64,
    inverse: &mut [f64],
    inverse_stride: usize,
) -> usize {
    let size = pivots.len();
    let width = size.next_multiple_of(L::WIDTH);
    assert!(
        stride >= size && triangle.len() >= size.saturating_sub(1) * stride + size,
        "shape of a triangle"
    );
    assert!(inverse_stride >= width && inverse.len() >= size * inverse_stride, "room for its inverse");
    let out = inverse.as_mut_ptr();
    let (mut longest, mut first) = (0.0, 0);
    for row in (0..size).rev() {
        let entries = &triangle[row * stride..][..size];
        let scale = lanes.splat(-scale);
        let reciprocal = lanes.splat(-pivots[row].recip());
        let mut squares = lanes.splat(0.0);
        let start = row / L::WIDTH * L::WIDTH;
        for at in (start..width).step_by(L::WIDTH) {
            // SAFETY: columns `at..at + WIDTH <= width` of rows below `size`, `inverse_stride` apart; the offset into `UNIT`
            // leaves `MAX_WIDTH >= WIDTH` entries.
            unsafe {
                // The unit vector of the diagonal, then the rows below that reach into these columns, in two chains.
                let mut sum = if at == start {
                    lanes.mul(scale, lanes.load64(UNIT.as_ptr().add(MAX_WIDTH - 1 - (row - start))))
                } else {
                    lanes.splat(0.0)
                };
                let mut other = lanes.splat(0.0);
                let end = size.min(at + L::WIDTH);
                let mut below = row + 1;
                while below + 1 < end {
                    let here = out.add(below * inverse_stride + at).cast_const();
                    sum = lanes.mul_add(lanes.splat(entries[below]), lanes.load64(here), sum);
                    let next = here.add(inverse_stride);
                    other = lanes.mul_add(lanes.splat(entries[below + 1]), lanes.load64(next), other);
                    below += 2;
                }
                if below < end {
                    let here = out.add(below * inverse_stride + at).cast_const();
                    sum = lanes.mul_add(lanes.splat(entries[below]), lanes.load64(here), sum);
                }
                let value = lanes.mul(lanes.add(sum, other), reciprocal);
                squares = lanes.mul_add(value, value, squares);
                lanes.store64(out.add(row * inverse_stride + at), value);
            }
        }
        let squares = lanes.sum(squares);
        if squares > longest {
            (longest, first) = (squares, row);
        }
    }
    first
}
