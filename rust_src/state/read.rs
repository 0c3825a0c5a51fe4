//! Taking a state out of its container, and trusting none of it.

use std::collections::BTreeMap;
use std::str::FromStr;

use safetensors::tensor::TensorView;
use safetensors::{Dtype, SafeTensorError, SafeTensors};

use super::{MOST_HEADER, Part, SCHEMA, State, checksum, stored, wrong};
use crate::error::Error;
use crate::rows::RowStore;
use crate::scalar::Scalar;

/// Rows no stream will ever have: counters up to here can be added without overflow.
const MOST_COUNTED: u64 = 1 << 62;

/// Hands out the words and arrays of a state, each once.
#[derive(Debug)]
pub struct Reader<'a> {
    /// What names begin with.
    within: String,
    class: String,
    dtype: String,
    words: BTreeMap<String, String>,
    arrays: BTreeMap<String, TensorView<'a>>,
}

impl<'a> Reader<'a> {
    /// Opens a container: sizes against the length of `bytes`, schema, checksum.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn open(bytes: &'a [u8]) -> Result<Self, Error> {
        // Before the crate sees it, which takes a hundred megabytes of header and some thirty times that to parse.
        let Some((length, rest)) = bytes.split_first_chunk() else {
            return Err(wrong(format!("expected a safetensors container, got {} bytes", bytes.len())));
        };
        let length = u64::from_le_bytes(*length);
        if length > rest.len().min(MOST_HEADER) as u64 {
            let most = rest.len().min(MOST_HEADER);
            return Err(wrong(format!("header: expected at most {most} bytes, got {length}")));
        }
        let container = |error: SafeTensorError| wrong(format!("not a whole safetensors container: {error}"));
        let (_, header) = SafeTensors::read_metadata(bytes).map_err(container)?;
        let arrays = SafeTensors::deserialize(bytes).map_err(container)?.tensors().into_iter().collect();
        let words = header.metadata().iter().flatten().map(|(name, word)| (name.clone(), word.clone()));
        let mut reader = Self {
            within: String::new(),
            class: String::new(),
            dtype: String::new(),
            words: words.collect(),
            arrays,
        };
        // The schema first: a later one may have another checksum.
        let schema = reader.word("schema")?;
        if schema != SCHEMA.to_string() {
            let later = if schema.parse::<u32>().is_ok_and(|schema| schema > SCHEMA) {
                ": a later release wrote it"
            } else {
                ""
            };
            return Err(wrong(format!("schema: expected {SCHEMA}, got {schema:.20}{later}")));
        }
        reader.words.insert("schema".into(), schema);
        let said = reader.word("checksum")?;
        let views = reader.arrays.iter();
        let found = checksum(
            &reader.words,
            views.map(|(name, view)| (name.as_str(), view.dtype(), view.shape(), view.data())),
        );
        if said != found {
            return Err(wrong(format!("checksum: expected {said:.20}, got {found}: the bytes have changed")));
        }
        reader.words.remove("schema");
        reader.class = reader.word("class")?;
        reader.dtype = reader.word("dtype")?;
        Ok(reader)
    }

    /// The type rows are stored in.
    #[must_use]
    pub fn dtype(&self) -> &str {
        &self.dtype
    }

    /// The object.
    ///
    /// # Errors
    /// [`Error::State`]; [`Error::Memory`].
    pub fn restore<S: State>(mut self) -> Result<S, Error> {
        for (what, expected, got) in [("class", S::CLASS, &self.class), ("dtype", S::DTYPE, &self.dtype)] {
            if expected != got {
                return Err(wrong(format!("{what}: expected {expected}, got {got:.20}")));
            }
        }
        let restored = self.within(&S::CLASS.to_lowercase(), S::read).map_err(|error| match error {
            Error::State { .. } | Error::Memory { .. } => error,
            other => wrong(other.to_string()),
        })?;
        match self.words.keys().chain(self.arrays.keys()).next() {
            None => Ok(restored),
            Some(name) => Err(wrong(format!("{name:.40}: expected nothing of that name in a {}", S::CLASS))),
        }
    }

    /// Reads a part that was written within its own name.
    ///
    /// # Errors
    /// Those of `read`.
    pub fn within<R>(
        &mut self,
        part: &str,
        read: impl FnOnce(&mut Self) -> Result<R, Error>,
    ) -> Result<R, Error> {
        let name = self.name(part);
        let outer = std::mem::replace(&mut self.within, name);
        let outcome = read(self);
        self.within = outer;
        outcome
    }

    /// Fills a part that was written under its own name.
    pub(crate) fn part(&mut self, name: &str, part: &mut (impl Part + ?Sized)) -> Result<(), Error> {
        self.within(name, |from| part.restore(from))
    }

    /// A setting, flag or single number.
    ///
    /// # Errors
    /// [`Error::State`] where it is not there or reads as something else.
    pub fn parse<V: FromStr>(&mut self, name: &str) -> Result<V, Error> {
        let word = self.word(name)?;
        word.parse().map_err(|_| self.unlike(name, std::any::type_name::<V>(), &format!("{word:.40}")))
    }

    /// The same for one that may be absent.
    ///
    /// # Errors
    /// As [`Reader::parse`].
    pub fn optional<V: FromStr>(&mut self, name: &str) -> Result<Option<V>, Error> {
        if self.words.contains_key(&self.name(name)) { self.parse(name).map(Some) } else { Ok(None) }
    }

    /// A counter.
    ///
    /// # Errors
    /// As [`Reader::parse`], and beyond what can ever be counted.
    pub fn counter(&mut self, name: &str) -> Result<u64, Error> {
        let counter = self.parse(name)?;
        if counter <= MOST_COUNTED {
            return Ok(counter);
        }
        Err(self.unlike(name, "a count of rows", &counter.to_string()))
    }

    /// A weight, energy or time: finite, 0 or more.
    ///
    /// # Errors
    /// As [`Reader::parse`].
    pub fn amount(&mut self, name: &str) -> Result<f64, Error> {
        let amount = self.parse(name)?;
        if amount >= 0.0 && f64::is_finite(amount) {
            return Ok(amount);
        }
        Err(self.unlike(name, "a finite number, 0 or more", &amount.to_string()))
    }

    /// A number that is not NaN.
    ///
    /// # Errors
    /// As [`Reader::parse`].
    pub fn number(&mut self, name: &str) -> Result<f64, Error> {
        let number: f64 = self.parse(name)?;
        if number.is_nan() { Err(self.unlike(name, "a number", "NaN")) } else { Ok(number) }
    }

    /// An index or length of at most `most`.
    ///
    /// # Errors
    /// As [`Reader::parse`].
    pub fn at_most(&mut self, name: &str, most: usize) -> Result<usize, Error> {
        let value = self.parse(name)?;
        if value <= most {
            return Ok(value);
        }
        Err(self.unlike(name, &format!("at most {most}"), &value.to_string()))
    }

    /// Refuses where there is no array of that name and shape; it stays to be read. Asked before room is made for what
    /// goes with it.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn expect(&self, name: &str, shape: &[usize]) -> Result<(), Error> {
        match self.arrays.get(&self.name(name)) {
            Some(view) if view.shape() == shape => Ok(()),
            Some(view) => Err(self.unlike(name, &format!("shape {shape:?}"), &format!("{:?}", view.shape()))),
            None => Err(wrong(format!("{}: expected an array of that name, got none", self.name(name)))),
        }
    }

    /// `count` finite numbers.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn numbers(&mut self, name: &str, count: usize) -> Result<Vec<f64>, Error> {
        let view = self.array(name, Dtype::F64, &[Some(count)])?;
        entries(view.data()).map(|value| self.finite(name, value)).collect()
    }

    /// `count` finite numbers, 0 or more.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn amounts(&mut self, name: &str, count: usize) -> Result<Vec<f64>, Error> {
        let amounts = self.numbers(name, count)?;
        match amounts.iter().find(|amount| **amount < 0.0) {
            None => Ok(amounts),
            Some(amount) => Err(self.unlike(name, "numbers of 0 or more", &amount.to_string())),
        }
    }

    /// Rows of `columns` numbers each, `most` of them at most, in which NaN stands for none.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn table(&mut self, name: &str, columns: usize, most: usize) -> Result<Vec<f64>, Error> {
        let view = self.array(name, Dtype::F64, &[None, Some(columns)])?;
        let rows = view.shape()[0];
        if rows > most {
            return Err(self.unlike(name, &format!("at most {most} rows"), &rows.to_string()));
        }
        let values: Vec<f64> = entries(view.data()).collect();
        match values.iter().find(|value| value.is_infinite()) {
            None => Ok(values),
            Some(value) => Err(self.unlike(name, "finite numbers, or NaN for none", &value.to_string())),
        }
    }

    /// `count` texts.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn texts(&mut self, name: &str, count: usize) -> Result<Vec<String>, Error> {
        let lengths = self.numbers(&format!("{name}.lengths"), count)?;
        let view = self.array(name, Dtype::U8, &[None])?;
        let mut data = view.data();
        let mut texts = Vec::with_capacity(count);
        for length in lengths {
            #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "compared after")]
            let whole = length as usize;
            let text = data.split_at_checked(whole).filter(|_| length >= 0.0 && length.fract() == 0.0);
            let Some((text, rest)) = text else {
                return Err(self.unlike(name, "texts as long as their lengths say", "others"));
            };
            let text = std::str::from_utf8(text).map_err(|_| self.unlike(name, "text", "other bytes"))?;
            texts.push(text.to_owned());
            data = rest;
        }
        if data.is_empty() {
            Ok(texts)
        } else {
            Err(self.unlike(name, "no more than its texts", "more bytes"))
        }
    }

    /// An upper triangle of order `most` or less, with zeros below: its order, and its entries row by row.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn triangle(&mut self, name: &str, most: usize) -> Result<(usize, Vec<f64>), Error> {
        let view = self.array(name, Dtype::F64, &[None, None])?;
        let order = view.shape()[0];
        if view.shape()[1] != order || order > most {
            let shape = format!("shape {:?}", view.shape());
            return Err(self.unlike(name, &format!("a square of order {most} or less"), &shape));
        }
        let square: Vec<f64> =
            entries(view.data()).map(|value| self.finite(name, value)).collect::<Result<_, _>>()?;
        let below = (1..order).find(|row| square[row * order..][..*row].iter().any(|entry| *entry != 0.0));
        match below {
            None => Ok((order, square)),
            Some(row) => Err(self.unlike(name, "zeros below the diagonal", &format!("others in row {row}"))),
        }
    }

    /// `count` rows of `dim` finite entries each.
    ///
    /// # Errors
    /// [`Error::State`].
    pub fn rows<T: Scalar>(&mut self, name: &str, count: usize, dim: usize) -> Result<RowStore<T>, Error> {
        let view = self.array(name, stored::<T>(), &[Some(count), Some(dim)])?;
        let mut rows = RowStore::zeros(count, dim);
        let size = size_of::<T>();
        for index in 0..count {
            let data = &view.data()[index * dim * size..][..dim * size];
            for (target, chunk) in rows.row_mut(index).iter_mut().zip(data.chunks_exact(size)) {
                let value = match *chunk {
                    [a, b, c, d] => f64::from(f32::from_le_bytes([a, b, c, d])),
                    [a, b, c, d, e, f, g, h] => f64::from_le_bytes([a, b, c, d, e, f, g, h]),
                    _ => f64::NAN,
                };
                *target = T::from_f64(self.finite(name, value)?);
            }
        }
        Ok(rows)
    }

    /// The array of that name, of that type and shape; None is any length.
    fn array(&mut self, name: &str, dtype: Dtype, shape: &[Option<usize>]) -> Result<TensorView<'a>, Error> {
        let Some(view) = self.arrays.remove(&self.name(name)) else {
            return Err(wrong(format!("{}: expected an array of that name, got none", self.name(name))));
        };
        let fits = shape.len() == view.shape().len()
            && shape.iter().zip(view.shape()).all(|(want, got)| want.is_none_or(|want| want == *got));
        if view.dtype() == dtype && fits {
            return Ok(view);
        }
        let want: Vec<String> =
            shape.iter().map(|length| length.map_or("any".into(), |length| length.to_string())).collect();
        let got = format!("{} of shape {:?}", view.dtype(), view.shape().iter().take(4).collect::<Vec<_>>());
        Err(self.unlike(name, &format!("{dtype} of shape [{}]", want.join(", ")), &got))
    }

    fn word(&mut self, name: &str) -> Result<String, Error> {
        let name = self.name(name);
        self.words
            .remove(&name)
            .ok_or_else(|| wrong(format!("{name}: expected a word of that name, got none")))
    }

    fn finite(&self, name: &str, value: f64) -> Result<f64, Error> {
        if value.is_finite() {
            Ok(value)
        } else {
            Err(self.unlike(name, "finite numbers", &value.to_string()))
        }
    }

    /// An error that says what was expected of `name`.
    pub(crate) fn unlike(&self, name: &str, expected: &str, got: &str) -> Error {
        wrong(format!("{}: expected {expected}, got {got}", self.name(name)))
    }

    /// The full name of a word or array.
    pub(crate) fn name(&self, name: &str) -> String {
        if self.within.is_empty() { name.to_owned() } else { format!("{}.{name}", self.within) }
    }
}

/// Little-endian numbers.
fn entries(data: &[u8]) -> impl Iterator<Item = f64> {
    data.chunks_exact(size_of::<f64>()).map(|chunk| chunk.try_into().map_or(f64::NAN, f64::from_le_bytes))
}
