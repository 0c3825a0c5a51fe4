//! Putting a state into its container.

use std::borrow::Cow;
use std::collections::BTreeMap;
use std::fmt::Debug;

use safetensors::{Dtype, View};

use super::{MOST_HEADER, Part, SCHEMA, checksum, stored, wrong};
use crate::error::Error;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Bytes before the header: its length.
const LENGTH: usize = size_of::<u64>();

/// Collects the words and arrays of a state.
#[derive(Debug, Default)]
pub struct Writer {
    /// What names begin with.
    within: String,
    words: BTreeMap<String, String>,
    arrays: BTreeMap<String, Array>,
    /// The first number found that is not finite.
    fault: Option<Error>,
}

/// An array as it goes into the container.
#[derive(Debug)]
struct Array {
    dtype: Dtype,
    shape: Vec<usize>,
    data: Vec<u8>,
}

impl View for &Array {
    fn dtype(&self) -> Dtype {
        self.dtype
    }

    fn shape(&self) -> &[usize] {
        &self.shape
    }

    fn data(&self) -> Cow<'_, [u8]> {
        Cow::Borrowed(&self.data)
    }

    fn data_len(&self) -> usize {
        self.data.len()
    }
}

impl Writer {
    /// Writes a part under its own name: `tracker` within `watch` becomes `watch.tracker`.
    pub fn within(&mut self, part: &str, write: impl FnOnce(&mut Self)) {
        let name = self.name(part);
        let outer = std::mem::replace(&mut self.within, name);
        write(self);
        self.within = outer;
    }

    /// A part under its own name.
    pub(crate) fn part(&mut self, name: &str, part: &(impl Part + ?Sized)) {
        self.within(name, |to| part.write(to));
    }

    /// A setting, counter, flag or single number. The debug form of a number reads back to the same bits.
    pub fn word(&mut self, name: &str, value: impl Debug) {
        self.words.insert(self.name(name), format!("{value:?}"));
    }

    /// The same for one that may be absent.
    pub fn optional(&mut self, name: &str, value: Option<impl Debug>) {
        if let Some(value) = value {
            self.word(name, value);
        }
    }

    /// A single number that has to be finite.
    pub fn number(&mut self, name: &str, value: f64) {
        self.check(name, 0, value);
        self.word(name, value);
    }

    /// A list of finite numbers.
    pub fn numbers(&mut self, name: &str, values: &[f64]) {
        self.array::<f64>(name, vec![values.len()], values.iter().copied());
    }

    /// Rows of `columns` numbers each, row-major, in which NaN stands for none.
    pub fn table(&mut self, name: &str, columns: usize, values: &[f64]) {
        if let Some(index) = values.iter().position(|value| value.is_infinite()) {
            self.check(name, index, values[index]);
        }
        let data = values.iter().flat_map(|value| value.to_le_bytes()).collect();
        let shape = vec![values.len().checked_div(columns).unwrap_or(0), columns];
        self.arrays.insert(self.name(name), Array { dtype: Dtype::F64, shape, data });
    }

    /// Texts: their bytes one after another, and the length of each.
    pub fn texts(&mut self, name: &str, texts: &[String]) {
        let lengths: Vec<f64> = texts.iter().map(|text| text.len() as f64).collect();
        self.numbers(&format!("{name}.lengths"), &lengths);
        let data: Vec<u8> = texts.iter().flat_map(|text| text.bytes()).collect();
        self.arrays.insert(self.name(name), Array { dtype: Dtype::U8, shape: vec![data.len()], data });
    }

    /// A square upper triangle, given by its entries on and above the diagonal; zeros below.
    pub fn triangle(&mut self, name: &str, order: usize, entry: impl Fn(usize, usize) -> f64) {
        let entry = &entry;
        let row = |row| (0..order).map(move |column| if column < row { 0.0 } else { entry(row, column) });
        self.array::<f64>(name, vec![order, order], (0..order).flat_map(row));
    }

    /// Long rows in their stored type, and rows of zeros up to `room` of them: an object that takes room for more than it
    /// holds writes as many, so that what is read is never much shorter than the room it takes.
    pub fn rows<T: Scalar>(&mut self, name: &str, rows: Rows<'_, T>, room: usize) {
        let zeros = std::iter::repeat_n(0.0, room.saturating_sub(rows.count()) * rows.dim());
        let entries = rows.iter().flatten().map(|entry| entry.to_f64()).chain(zeros);
        self.array::<T>(name, vec![rows.count().max(room), rows.dim()], entries);
    }

    /// An array stored as `T`, whose values the entries are.
    fn array<T: Scalar>(&mut self, name: &str, shape: Vec<usize>, entries: impl Iterator<Item = f64>) {
        let dtype = stored::<T>();
        let mut data = Vec::with_capacity(shape.iter().product::<usize>() * size_of::<T>());
        for (index, entry) in entries.enumerate() {
            self.check(name, index, entry);
            match dtype {
                Dtype::F32 => data.extend_from_slice(&f32::from_f64(entry).to_le_bytes()),
                _ => data.extend_from_slice(&entry.to_le_bytes()),
            }
        }
        self.arrays.insert(self.name(name), Array { dtype, shape, data });
    }

    fn check(&mut self, name: &str, index: usize, value: f64) {
        if !value.is_finite() && self.fault.is_none() {
            let name = self.name(name);
            self.fault = Some(wrong(format!("{name}: expected finite numbers, got {value} at {index}")));
        }
    }

    fn name(&self, name: &str) -> String {
        if self.within.is_empty() { name.to_owned() } else { format!("{}.{name}", self.within) }
    }

    /// The bytes of the container.
    pub(super) fn finish(mut self, class: &str, dtype: &str) -> Result<Vec<u8>, Error> {
        if let Some(fault) = self.fault {
            return Err(fault);
        }
        self.words.insert("class".into(), class.into());
        self.words.insert("schema".into(), SCHEMA.to_string());
        self.words.insert("dtype".into(), dtype.into());
        let arrays = self.arrays.iter().map(|(name, array)| (name.as_str(), array));
        let sum = checksum(
            &self.words,
            arrays.clone().map(|(name, array)| (name, array.dtype, &array.shape[..], &array.data[..])),
        );
        self.words.insert("checksum".into(), sum);
        let words = self.words.into_iter().collect();
        let mut bytes =
            safetensors::serialize(arrays, Some(words)).map_err(|error| wrong(error.to_string()))?;
        put_in_order(&mut bytes)?;
        Ok(bytes)
    }
}

/// Writes the header anew with its names in order: the crate leaves its words in the order of a hash table, another in
/// each process, and the same state would not give the same bytes.
fn put_in_order(bytes: &mut [u8]) -> Result<(), Error> {
    let Some((length, rest)) = bytes.split_first_chunk_mut::<LENGTH>() else {
        return Err(wrong("the container has no header"));
    };
    let length = usize::try_from(u64::from_le_bytes(*length)).unwrap_or(usize::MAX);
    if length > MOST_HEADER {
        return Err(wrong(format!("header: expected at most {MOST_HEADER} bytes, got {length}")));
    }
    let header = rest.get_mut(..length).ok_or_else(|| wrong("the container has no header"))?;
    let tree: BTreeMap<String, BTreeMap<String, serde_json::Value>> =
        serde_json::from_slice(header).map_err(|error| wrong(error.to_string()))?;
    let ordered = serde_json::to_vec(&tree).map_err(|error| wrong(error.to_string()))?;
    if ordered.len() > length {
        return Err(wrong("the header cannot be put in order"));
    }
    header.fill(b' ');
    header[..ordered.len()].copy_from_slice(&ordered);
    Ok(())
}
