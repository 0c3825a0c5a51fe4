//! States: bytes that are not one are refused, by what is wrong with them, and never do anything else.

use perpend::state::{MOST_HEADER, SCHEMA};
use perpend::{Basis, Error, State, Tracker};
use proptest::prelude::*;
use safetensors::tensor::TensorView;
use safetensors::{Dtype, SafeTensors};

use crate::state::{basis, small, tracker};

/// What was wrong.
pub fn refusal<S: State>(bytes: &[u8]) -> String {
    let error = S::from_bytes(bytes).err().expect("a refusal");
    let Error::State { what } = &error else { unreachable!("expected a state error, got {error:?}") };
    what.clone()
}

/// Reads bytes that may be anything: an object with the very same state, or a state error.
pub fn same_or_refused<S: State>(bytes: &[u8], state: &[u8]) {
    match S::from_bytes(bytes) {
        Ok(object) => assert_eq!(object.to_bytes().unwrap(), state),
        Err(error) => assert!(matches!(error, Error::State { .. }), "{error:?}"),
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn bytes_of_chance_are_refused(
        bytes in prop::collection::vec(any::<u8>(), 0..600),
        header in "[{}\\[\\]:,\"_a-zF0-9 ]{0,200}",
    ) {
        refusal::<Basis<f64>>(&bytes);
        let mut framed = (header.len() as u64).to_le_bytes().to_vec();
        framed.extend_from_slice(header.as_bytes());
        framed.extend_from_slice(&bytes);
        refusal::<Tracker<f32>>(&framed);
    }

    #[test]
    fn a_few_bytes_changed_are_noticed(
        changes in prop::collection::vec((any::<prop::sample::Index>(), any::<u8>()), 2..6),
    ) {
        let state = tracker::<f64>(small()).to_bytes().unwrap();
        let mut bytes = state.clone();
        for (index, value) in &changes {
            bytes[index.index(state.len())] = *value;
        }
        same_or_refused::<Tracker<f64>>(&bytes, &state);
    }
}

#[test]
fn every_truncation_is_refused() {
    let state = basis::<f64>(4, None).to_bytes().unwrap();
    (0..state.len()).for_each(|length| drop(refusal::<Basis<f64>>(&state[..length])));
    let state = tracker::<f32>(small()).to_bytes().unwrap();
    (0..state.len()).for_each(|length| drop(refusal::<Tracker<f32>>(&state[..length])));
    let longer = [&state[..], &[0]].concat();
    refusal::<Tracker<f32>>(&longer);
}

#[test]
fn every_single_byte_changed_to_any_other_is_refused_or_means_the_same() {
    fn check<S: State>(state: &[u8], values: impl Fn(u8) -> Vec<u8>) {
        let mut bytes = state.to_vec();
        for place in 0..state.len() {
            for value in values(state[place]) {
                bytes[place] = value;
                same_or_refused::<S>(&bytes, state);
            }
            bytes[place] = state[place];
        }
    }
    check::<Basis<f64>>(&basis::<f64>(4, Some(3)).to_bytes().unwrap(), |_| (0..=255).collect());
    // Every bit, and the bytes that mean something to the header.
    let some = |was: u8| (0..8).map(|bit| was ^ (1 << bit)).chain(*b"\0 \"\\,:[]{}019eE-+.\xff").collect();
    check::<Basis<f32>>(&basis::<f32>(4, None).to_bytes().unwrap(), some);
    check::<Tracker<f64>>(&tracker::<f64>(small()).to_bytes().unwrap(), some);
    check::<Tracker<f32>>(&tracker::<f32>(small()).to_bytes().unwrap(), some);
}

#[test]
fn a_giant_header_is_refused_by_its_length_alone() {
    let state = basis::<f64>(4, None).to_bytes().unwrap();
    for length in
        [state.len() as u64, MOST_HEADER as u64 + 1, 1 << 40, i64::MAX as u64, u64::MAX - 7, u64::MAX]
    {
        let mut bytes = state.clone();
        bytes[..8].copy_from_slice(&length.to_le_bytes());
        assert!(refusal::<Basis<f64>>(&bytes).starts_with("header: expected at most "));
        // The same with as many bytes to go with it as can reasonably be had.
        bytes.resize(3 * MOST_HEADER, b' ');
        refusal::<Basis<f64>>(&bytes);
    }
    let mut deep = (MOST_HEADER as u64).to_le_bytes().to_vec();
    deep.resize(8 + MOST_HEADER, b'[');
    refusal::<Basis<f64>>(&deep);
}

/// A container taken apart, to be forged.
pub struct Forgery {
    words: Vec<(String, String)>,
    arrays: Vec<(String, Dtype, Vec<usize>, Vec<u8>)>,
}

impl Forgery {
    pub fn of(state: &[u8]) -> Self {
        let (_, header) = SafeTensors::read_metadata(state).unwrap();
        let words = header.metadata().as_ref().unwrap();
        let container = SafeTensors::deserialize(state).unwrap();
        let arrays = container
            .iter()
            .map(|(name, view)| (name.to_owned(), view.dtype(), view.shape().to_vec(), view.data().to_vec()));
        Self {
            words: words.iter().map(|(name, word)| (name.clone(), word.clone())).collect(),
            arrays: arrays.collect(),
        }
    }

    pub fn word(mut self, name: &str, word: &str) -> Self {
        self.words.retain(|(known, _)| known != name);
        self.words.push((name.into(), word.into()));
        self
    }

    pub fn array(
        mut self,
        name: &str,
        forge: impl FnOnce(&mut Dtype, &mut Vec<usize>, &mut Vec<u8>),
    ) -> Self {
        let (_, dtype, shape, data) = self.arrays.iter_mut().find(|(known, ..)| known == name).unwrap();
        forge(dtype, shape, data);
        self
    }

    /// Sets a number of a `float64` array.
    pub fn number(self, name: &str, index: usize, value: f64) -> Self {
        self.array(name, |_, _, data| data[8 * index..][..8].copy_from_slice(&value.to_le_bytes()))
    }

    /// Sets any number of any `float64` array.
    pub fn any_number(self, array: prop::sample::Index, place: prop::sample::Index, value: f64) -> Self {
        let numbers =
            self.arrays.iter().filter(|(_, dtype, _, data)| *dtype == Dtype::F64 && !data.is_empty());
        let numbers: Vec<(String, usize)> =
            numbers.map(|(name, .., data)| (name.clone(), data.len() / 8)).collect();
        let (name, length) = array.get(&numbers).clone();
        self.number(&name, place.index(length), value)
    }

    pub fn without(mut self, name: &str) -> Self {
        self.words.retain(|(known, _)| known != name);
        self.arrays.retain(|(known, ..)| known != name);
        self
    }

    /// The container with a checksum that fits: the reader says itself which one it would have expected.
    pub fn bytes(self) -> Vec<u8> {
        let refused = refusal::<Basis<f64>>(&self.serialize());
        let Some((_, rest)) = refused.split_once("got crc32:") else { return self.serialize() };
        let sum = format!("crc32:{}", &rest[..8]);
        self.word("checksum", &sum).serialize()
    }

    fn serialize(&self) -> Vec<u8> {
        let views = self.arrays.iter().map(|(name, dtype, shape, data)| {
            (name.as_str(), TensorView::new(*dtype, shape.clone(), data).unwrap())
        });
        safetensors::serialize(views, Some(self.words.iter().cloned().collect())).unwrap()
    }
}

#[test]
fn forgeries_of_a_basis_are_refused_by_what_is_wrong_with_them() {
    let state = basis::<f64>(4, Some(3)).to_bytes().unwrap();
    let forged = || Forgery::of(&state).word("checksum", "crc32:");
    let cases: Vec<(Forgery, &str)> = vec![
        (forged().word("class", "Tracker"), "class: expected Basis, got Tracker"),
        (forged().word("dtype", "float32"), "dtype: expected float64, got float32"),
        (forged().without("class"), "class: expected a word of that name, got none"),
        (
            forged().word("basis.dim", "5"),
            "basis.vectors: expected F64 of shape [2, 5], got F64 of shape [2, 4]",
        ),
        (forged().word("basis.dim", "18446744073709551615"), "basis.vectors: expected F64 of shape"),
        (forged().word("basis.dim", "0"), "dim: expected at least 1, got 0"),
        (forged().word("basis.dim", "-1"), "basis.dim: expected usize, got -1"),
        (forged().without("basis.dim"), "basis.dim: expected a word of that name, got none"),
        (forged().word("basis.capacity", "5"), "capacity: expected at most dim = 4"),
        (forged().word("basis.capacity", "1"), "basis.triangular: expected a square of order 1 or less"),
        (forged().word("basis.tolerance.relative", "NaN"), "tolerance: expected a finite number, 0 or more"),
        (forged().word("basis.tolerance.absolute", "-1.0"), "absolute tolerance: expected a finite number"),
        (forged().word("basis.turn", "5"), "basis.turn: expected at most 4, got 5"),
        (forged().word("basis.turns", "1"), "basis.turns: expected nothing of that name in a Basis"),
        (forged().without("basis.vectors"), "basis.vectors: expected an array of that name, got none"),
        (forged().number("basis.vectors", 3, f64::NAN), "basis.vectors: expected finite numbers, got NaN"),
        (
            forged().number("basis.vectors", 3, f64::INFINITY),
            "basis.vectors: expected finite numbers, got inf",
        ),
        (forged().number("basis.vectors", 3, 0.5), "basis.vectors: expected orthonormal rows"),
        (forged().number("basis.vectors", 3, 1e300), "basis.vectors: expected orthonormal rows"),
        (forged().number("basis.triangular", 1, f64::NAN), "basis.triangular: expected finite numbers"),
        (
            forged().number("basis.triangular", 2, 1e-300),
            "basis.triangular: expected zeros below the diagonal",
        ),
        (
            forged().number("basis.triangular", 3, 0.0),
            "basis.triangular: expected a positive diagonal, got 0",
        ),
        (
            forged().number("basis.triangular", 3, -1.0),
            "basis.triangular: expected a positive diagonal, got -1",
        ),
        (
            forged().array("basis.vectors", |dtype, shape, _| (*dtype, *shape) = (Dtype::F32, vec![4, 4])),
            "basis.vectors: expected F64 of shape [2, 4], got F32",
        ),
        (
            forged().array("basis.vectors", |_, shape, _| *shape = vec![8]),
            "basis.vectors: expected F64 of shape [2, 4], got F64 of shape [8]",
        ),
        (
            forged().array("basis.triangular", |_, shape, _| *shape = vec![1, 4]),
            "basis.triangular: expected a square",
        ),
        (
            forged().array("basis.triangular", |_, shape, data| {
                (*shape, *data) = (vec![0, 1 << 60], Vec::new());
            }),
            "basis.triangular: expected a square",
        ),
    ];
    for (forgery, expected) in cases {
        let refused = refusal::<Basis<f64>>(&forgery.bytes());
        assert!(refused.starts_with(expected), "expected \"{expected}\", got \"{refused}\"");
    }
    let later = forged().word("schema", &(SCHEMA + 1).to_string()).serialize();
    assert_eq!(refusal::<Basis<f64>>(&later), "schema: expected 1, got 2: a later release wrote it");
    let none = forged().word("schema", "first").serialize();
    assert_eq!(refusal::<Basis<f64>>(&none), "schema: expected 1, got first");
    let bare = safetensors::serialize(std::iter::empty::<(&str, TensorView<'_>)>(), None).unwrap();
    assert_eq!(refusal::<Basis<f64>>(&bare), "schema: expected a word of that name, got none");
}

#[test]
fn forgeries_of_a_tracker_are_refused_by_what_is_wrong_with_them() {
    let state = tracker::<f64>(small()).to_bytes().unwrap();
    let forged = || Forgery::of(&state).word("checksum", "crc32:");
    let cases: Vec<(Forgery, &str)> = vec![
        (forged().word("tracker.channels", "1000000000"), "tracker.mean: expected F64 of shape [1000000000]"),
        (forged().word("tracker.rank", "0"), "rank: expected 1 to channels"),
        (forged().word("tracker.rank", "2"), "tracker.directions: expected F64 of shape [3, 4]"),
        (forged().word("tracker.guard", "4"), "guard: expected at most channels - rank = 3"),
        (forged().without("tracker.guard"), "tracker.directions: expected F64 of shape [4, 4]"),
        (forged().word("tracker.memory", "1.0"), "memory: expected a finite number of rows above 1"),
        (forged().word("tracker.memory", "NaN"), "memory: expected a finite number of rows above 1"),
        (forged().word("tracker.center", "maybe"), "tracker.center: expected bool, got maybe"),
        (
            forged().word("tracker.samples", "18446744073709551615"),
            "tracker.samples: expected a count of rows",
        ),
        (forged().word("tracker.skipped", "-3"), "tracker.skipped: expected u64, got -3"),
        (forged().word("tracker.clock", "inf"), "tracker.clock: expected a finite number, 0 or more"),
        (forged().word("tracker.weight", "-1.0"), "tracker.weight: expected a finite number, 0 or more"),
        (forged().word("tracker.lost", "NaN"), "tracker.lost: expected a finite number, 0 or more"),
        (forged().word("tracker.turn", "99"), "tracker.turn: expected at most 2"),
        (forged().word("tracker.share", "1.5"), "share: expected a number between 0 and 1"),
        (forged().word("tracker.axes.reported", "0"), "tracker.axes.reported: expected 1, or a share, got 0"),
        (forged().word("tracker.cuts", "18446744073709551615"), "tracker.cuts: expected a count of rows"),
        (forged().word("tracker.axes.found", "2"), "tracker.axes.found: expected at most 1"),
        (forged().word("tracker.axes.found", "0"), "tracker.axes: expected zeros from row 0 on"),
        (forged().number("tracker.mean", 0, f64::NAN), "tracker.mean: expected finite numbers"),
        (
            forged().number("tracker.mean.weights", 1, -1.0),
            "tracker.mean.weights: expected numbers of 0 or more",
        ),
        (forged().number("tracker.energies", 0, -1.0), "tracker.energies: expected numbers of 0 or more"),
        (forged().number("tracker.factor", 0, 1e200), "tracker.factor: expected squares within the range"),
        (forged().number("tracker.factor", 2, 1.0), "tracker.factor: expected zeros below the diagonal"),
        (forged().number("tracker.directions", 1, 0.9), "tracker.directions: expected orthonormal rows"),
        (forged().number("tracker.axes", 0, 2.0), "tracker.axes: expected orthonormal rows"),
    ];
    for (forgery, expected) in cases {
        let refused = refusal::<Tracker<f64>>(&forgery.bytes());
        assert!(refused.starts_with(expected), "expected \"{expected}\", got \"{refused}\"");
    }
}
