//! Storage of basis vectors: one contiguous, aligned run a vector.
//!
//! Rows start on cache lines, and the distance between them stays away from multiples of a page: rows a power
//! of two apart would fall into the same few cache sets.

use aligned_vec::{AVec, ConstAlign};

use crate::scalar::Scalar;

/// Bytes a row is aligned to: a cache line, and the widest vector register.
const ALIGNMENT: usize = 64;
/// Bytes after which the first-level cache maps addresses to the same set.
const PAGE: usize = 4096;

/// Read-only view of the leading rows of a [`RowStore`].
#[derive(Clone, Copy, Debug)]
pub struct Rows<'a, T> {
    data: &'a [T],
    stride: usize,
    count: usize,
    dim: usize,
}

impl<'a, T: Scalar> Rows<'a, T> {
    /// Views `count` rows of `dim` entries, `stride` apart. None where `data` is too short for them.
    #[must_use]
    pub fn new(data: &'a [T], stride: usize, count: usize, dim: usize) -> Option<Self> {
        let needed = if count == 0 { 0 } else { (count - 1) * stride + dim };
        (stride >= dim && data.len() >= needed).then_some(Self { data, stride, count, dim })
    }

    /// How many rows.
    #[must_use]
    pub fn count(&self) -> usize {
        self.count
    }

    /// Entries a row.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.dim
    }

    /// Entries from the start of one row to the start of the next.
    #[must_use]
    pub fn stride(&self) -> usize {
        self.stride
    }

    /// Where row 0 starts: row `i` starts `i stride` further on.
    pub(crate) fn start(&self) -> *const T {
        self.data.as_ptr()
    }

    /// Row `index`.
    #[must_use]
    pub fn row(&self, index: usize) -> &'a [T] {
        &self.data[index * self.stride..][..self.dim]
    }

    /// The rows in order.
    pub fn iter(&self) -> impl Iterator<Item = &'a [T]> + use<'a, T> {
        let view = *self;
        (0..view.count).map(move |index| view.row(index))
    }
}

/// Owned rows of equal length with room for more.
#[derive(Clone, Debug)]
pub struct RowStore<T> {
    data: AVec<T, ConstAlign<ALIGNMENT>>,
    stride: usize,
    dim: usize,
    rows: usize,
}

impl<T: Scalar> RowStore<T> {
    /// Room for `rows` rows of `dim` entries, all zero.
    #[must_use]
    pub fn zeros(rows: usize, dim: usize) -> Self {
        let stride = stride_for::<T>(dim);
        let mut data = AVec::with_capacity(ALIGNMENT, rows * stride);
        data.resize(rows * stride, T::default());
        Self { data, stride, dim, rows }
    }

    /// How many rows there is room for.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Entries a row.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.dim
    }

    /// Makes room for `rows` rows, keeping what is there.
    pub fn grow(&mut self, rows: usize) {
        if rows > self.rows {
            self.data.resize(rows * self.stride, T::default());
            self.rows = rows;
        }
    }

    /// The first `count` rows.
    ///
    /// # Panics
    /// Where there are fewer.
    #[must_use]
    pub fn view(&self, count: usize) -> Rows<'_, T> {
        self.view_range(0, count)
    }

    /// `count` rows from row `first` on.
    ///
    /// # Panics
    /// Where there are fewer.
    #[must_use]
    pub fn view_range(&self, first: usize, count: usize) -> Rows<'_, T> {
        assert!(first + count <= self.rows, "{count} rows from {first} on asked of {}", self.rows);
        Rows { data: &self.data[first * self.stride..], stride: self.stride, count, dim: self.dim }
    }

    /// Row `index`.
    #[must_use]
    pub fn row(&self, index: usize) -> &[T] {
        &self.data[index * self.stride..][..self.dim]
    }

    /// Row `index`, to write to.
    pub fn row_mut(&mut self, index: usize) -> &mut [T] {
        &mut self.data[index * self.stride..][..self.dim]
    }

    /// Rows `first` and `second`, to write to.
    ///
    /// # Panics
    /// Unless `first < second`.
    pub fn pair_mut(&mut self, first: usize, second: usize) -> (&mut [T], &mut [T]) {
        assert!(first < second, "a pair is two rows in order");
        let (head, tail) = self.data.split_at_mut(second * self.stride);
        (&mut head[first * self.stride..][..self.dim], &mut tail[..self.dim])
    }

    /// All storage, with the stride: what a sweep that changes every row works on.
    pub fn parts_mut(&mut self) -> (&mut [T], usize) {
        (&mut self.data, self.stride)
    }
}

/// Entries between row starts: whole cache lines, never a whole number of pages.
fn stride_for<T>(dim: usize) -> usize {
    let line = ALIGNMENT / size_of::<T>();
    let stride = dim.next_multiple_of(line).max(line);
    if (stride * size_of::<T>()).is_multiple_of(PAGE) { stride + line } else { stride }
}
