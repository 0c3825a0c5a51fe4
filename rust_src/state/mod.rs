//! The state of an object as bytes: all that what it does next depends on, and nothing else.
//!
//! # The container
//!
//! Safetensors, version 1 of the schema: a general reader finds named arrays, little-endian and row-major, and a header of
//! words. Names begin with the class in small letters: `basis.vectors`, `tracker.mean`. Four words have no class:
//!
//! | word | says |
//! |---|---|
//! | `class` | `Basis`, `Tracker`, `Watch` |
//! | `schema` | [`SCHEMA`] of the release that wrote it |
//! | `dtype` | the type rows are stored in, `float64` or `float32` |
//! | `checksum` | CRC-32 of all names, words, shapes and data, in the order of their names |
//!
//! Long rows are arrays in the stored type, everything else of length is `float64`. Settings, counters and single numbers
//! are words: integers in full, floating point in the shortest form that reads back to the same bits.
//!
//! The same state gives the same bytes, always. What is read back and continued is what would have gone on, to the last
//! bit, on the same kernel path.
//!
//! # What reading refuses
//!
//! Bytes are taken for hostile. Before any room is made, sizes are held against the length of what was given, so reading
//! takes a small multiple of it, and a header is at most [`MOST_HEADER`] bytes. The checksum finds what rotted; the checks
//! behind it (settings in range, finite numbers, a triangle that is one, orthonormal rows, indices within) find what was
//! made up.
//!
//! # How a class joins
//!
//! It implements [`State`] in a file `state.rs` beside it. Its `write` takes the object apart field by field, naming each, so
//! that the compiler asks about a new one; what has a state of its own is written [`Writer::within`] it. A part of a class
//! whose fields are its own affair implements [`Part`] where it is defined.

mod read;
mod write;

pub use read::Reader;
pub use write::Writer;

use std::collections::BTreeMap;

use safetensors::Dtype;

use crate::error::Error;
use crate::orthonormal::orthogonality_bound;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// The schema written, and the latest one read.
pub const SCHEMA: u32 = 1;

/// Bytes of a header at most. A parsed header takes some thirty times its length, which this keeps to a few megabytes;
/// names of channels and the like belong into arrays.
pub const MOST_HEADER: usize = 1 << 16;

/// Loss of orthogonality, in units of eps of the stored type, beyond which rows are refused; in the Frobenius norm, which is
/// the spectral norm or more. A hundred times what a single row is promised to keep, and harmless yet.
const MOST_LOSS: f64 = 1e3;
/// The same for each row: a spectral norm of `10 eps sqrt(rank)`, which is promised, is at most this much in that norm.
const MOST_LOSS_A_ROW: f64 = 10.0;

/// Entries of an orthonormal row at most, before their products are trusted to be numbers.
const MOST_ENTRY: f64 = 2.0;

/// An object whose future is in its state.
pub trait State: Sized {
    /// The class, as Python knows it.
    const CLASS: &'static str;
    /// The type rows are stored in, as Python knows it.
    const DTYPE: &'static str;

    /// Writes all that what it does next depends on.
    fn write(&self, to: &mut Writer);

    /// Reads what [`State::write`] wrote, and checks it.
    ///
    /// # Errors
    /// [`Error::State`], saying what is wrong; [`Error::Parameter`] for a setting out of its range; [`Error::Memory`].
    fn read(from: &mut Reader<'_>) -> Result<Self, Error>;

    /// The state as bytes. One copy of all arrays, and another while it works.
    ///
    /// # Errors
    /// [`Error::State`] where a number has grown beyond the finite ones: nothing is written that could not be read.
    fn to_bytes(&self) -> Result<Vec<u8>, Error> {
        let mut writer = Writer::default();
        writer.within(&Self::CLASS.to_lowercase(), |to| self.write(to));
        writer.finish(Self::CLASS, Self::DTYPE)
    }

    /// The object whose state this is. Takes a small multiple of the length of `bytes`, and `2 rank dim` flops for each row
    /// that has to be orthonormal.
    ///
    /// # Errors
    /// [`Error::State`], saying what is wrong; [`Error::Memory`].
    fn from_bytes(bytes: &[u8]) -> Result<Self, Error> {
        Reader::open(bytes)?.restore()
    }
}

/// What is made with its room and settings, and then filled with the rest of its state.
pub(crate) trait Part {
    /// Writes all that what it does next depends on.
    fn write(&self, to: &mut Writer);

    /// Reads what [`Part::write`] wrote, and checks it. What was there counts for nothing, on an error as well.
    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error>;
}

/// A state error.
pub(crate) fn wrong(what: impl Into<String>) -> Error {
    Error::State { what: what.into() }
}

/// Refuses rows that are not orthonormal; `name` says which they are.
pub(crate) fn check_orthonormal<T: Scalar>(name: &str, rows: Rows<'_, T>) -> Result<(), Error> {
    let bounded = rows.iter().flatten().all(|entry| entry.to_f64().abs() <= MOST_ENTRY);
    let loss = if bounded { orthogonality_bound(rows) } else { f64::INFINITY };
    let most = MOST_LOSS.max(MOST_LOSS_A_ROW * rows.count() as f64) * T::EPSILON;
    if loss <= most {
        return Ok(());
    }
    Err(wrong(format!(
        "{name}: expected orthonormal rows, to {most:.1e}, got rows that are not, by {loss:.1e}"
    )))
}

/// How rows of `T` are called in the container.
fn stored<T: Scalar>() -> Dtype {
    if size_of::<T>() == size_of::<f32>() { Dtype::F32 } else { Dtype::F64 }
}

/// CRC-32 of words and arrays, in the order of their names, each with its length, so that none runs into the next.
fn checksum<'a>(
    words: &BTreeMap<String, String>,
    arrays: impl Iterator<Item = (&'a str, Dtype, &'a [usize], &'a [u8])>,
) -> String {
    let mut sum = crc32fast::Hasher::new();
    let mut take = |bytes: &[u8]| {
        sum.update(&(bytes.len() as u64).to_le_bytes());
        sum.update(bytes);
    };
    for (name, word) in words.iter().filter(|(name, _)| *name != "checksum") {
        take(name.as_bytes());
        take(word.as_bytes());
    }
    for (name, dtype, shape, data) in arrays {
        take(name.as_bytes());
        take(dtype.to_string().as_bytes());
        for &length in shape {
            take(&(length as u64).to_le_bytes());
        }
        take(data);
    }
    format!("crc32:{:08x}", sum.finalize())
}
