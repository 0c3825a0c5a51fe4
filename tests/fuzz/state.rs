//! Fuzz target: bytes taken for a state. What is read must survive being worked with.
//!
//! The fuzzer would never guess a checksum, nor a header as long as it says: both are put right before the bytes are read
//! once more, so that what lies behind is reached.
#![no_main]
#![allow(missing_docs, reason = "a program, not a library")]
#![allow(clippy::expect_used, clippy::panic, reason = "a panic is what a fuzzer looks for")]

use libfuzzer_sys::fuzz_target;
use perpend::watch::Watch;
use perpend::{Basis, Error, Scalar, State, Tracker};

fuzz_target!(|bytes: &[u8]| {
    read(bytes);
    let mut mended = bytes.to_vec();
    mend_length(&mut mended);
    if mend_checksum(&mut mended) {
        read(&mended);
    }
});

fn read(bytes: &[u8]) {
    if let Some(basis) = accepted::<Basis<f64>>(bytes) {
        work_on_basis(basis);
    }
    if let Some(basis) = accepted::<Basis<f32>>(bytes) {
        work_on_basis(basis);
    }
    if let Some(tracker) = accepted::<Tracker<f64>>(bytes) {
        work_on_tracker(tracker);
    }
    if let Some(tracker) = accepted::<Tracker<f32>>(bytes) {
        work_on_tracker(tracker);
    }
    if let Some(watch) = accepted::<Watch<f64>>(bytes) {
        work_on_watch(watch);
    }
    if let Some(watch) = accepted::<Watch<f32>>(bytes) {
        work_on_watch(watch);
    }
}

/// The object; any error must be that of a state.
fn accepted<S: State>(bytes: &[u8]) -> Option<S> {
    match S::from_bytes(bytes) {
        Ok(object) => {
            let again = object.to_bytes().expect("what was read can be written");
            let same = S::from_bytes(&again).and_then(|object| object.to_bytes());
            assert_eq!(same.expect("what was written can be read"), again);
            Some(object)
        }
        Err(Error::State { .. } | Error::Memory { .. }) => None,
        Err(other) => panic!("expected a state error, got {other:?}"),
    }
}

fn work_on_basis<T: Scalar>(mut basis: Basis<T>) {
    let dim = basis.dim();
    let rows: Vec<f64> = (0..3 * dim).map(|index| ((index * index + 7) % 23) as f64 - 11.0).collect();
    // Outcomes differ, and an overflow is one: what counts is that there is one.
    let _ = basis.solve(&rows[..dim]);
    let _ = basis.condition();
    let _ = basis.add(&rows[dim..2 * dim]);
    let _ = basis.add_rows(&rows, &mut Vec::new());
    while basis.rank() > 0 {
        basis.drop(basis.rank() / 2).expect("a vector to drop");
        assert!(basis.vectors().iter().flatten().all(|entry| entry.to_f64().is_finite()));
    }
    basis.add(&rows[..dim]).expect("a vector to add");
}

fn work_on_tracker<T: Scalar>(mut tracker: Tracker<T>) {
    let channels = tracker.settings().channels;
    let mut row: Vec<f64> = (0..channels).map(|index| ((index * index + 7) % 23) as f64 - 11.0).collect();
    let _ = tracker.refresh();
    for tick in 0..3 {
        let _ = tracker.update_after(&row, 1.0, f64::from(tick));
        row[channels / 2] = f64::NAN;
        let _ = tracker.refresh();
        let _ = tracker.certificate();
        let mut values = vec![0.0; channels];
        let _ = tracker.reconstruct_into(&row, &mut values);
        let _ = tracker.merge(&tracker.clone());
        assert!(tracker.directions().iter().flatten().all(|entry| entry.to_f64().is_finite()));
        assert!(tracker.mean().iter().all(|value| value.is_finite()));
    }
}

fn work_on_watch<T: Scalar>(mut watch: Watch<T>) {
    let channels = watch.settings().channels;
    let mut row: Vec<f64> = (0..channels).map(|index| ((index * index + 7) % 23) as f64 - 11.0).collect();
    for tick in 0..40 {
        row[tick % channels] += 0.25;
        let _ = watch.tick(&row);
        if tick == 20 {
            row[0] = f64::NAN;
            watch.accept();
        }
    }
    let _ = watch.settle_on(&row.repeat(30));
    let _ = watch.orthogonality_error();
}

/// Sets the length of the header to where its brackets close.
fn mend_length(bytes: &mut [u8]) {
    let Some((length, rest)) = bytes.split_first_chunk_mut() else { return };
    let (mut depth, mut quoted, mut escaped) = (0, false, false);
    for (index, byte) in rest.iter().enumerate() {
        match byte {
            _ if escaped => escaped = false,
            b'\\' if quoted => escaped = true,
            b'"' => quoted = !quoted,
            b'{' if !quoted => depth += 1,
            b'}' if !quoted => {
                depth -= 1;
                if depth == 0 {
                    // The blanks behind it belong to it.
                    let blanks = rest[index + 1..].iter().take_while(|byte| **byte == b' ').count();
                    *length = ((index + 1 + blanks) as u64).to_le_bytes();
                    return;
                }
            }
            _ => {}
        }
    }
}

/// Puts in the checksum that the reader says it found.
fn mend_checksum(bytes: &mut [u8]) -> bool {
    let Err(Error::State { what }) = Basis::<f64>::from_bytes(bytes) else { return false };
    let Some((_, found)) = what.split_once(", got crc32:") else { return false };
    let key = b"\"checksum\":\"crc32:";
    let Some(place) = bytes.windows(key.len()).position(|window| window == key) else { return false };
    let Some(target) = bytes.get_mut(place + key.len()..place + key.len() + 8) else { return false };
    target.copy_from_slice(&found.as_bytes()[..8]);
    true
}
