//! Fuzz target: a sequence of calls with any bit patterns; after each, what the class promises holds.
#![no_main]
#![allow(missing_docs, reason = "a program, not a library")]
#![allow(clippy::expect_used, clippy::panic, reason = "a panic is what a fuzzer looks for")]

mod basis;
mod tape;
mod tracker;
mod watch;

use libfuzzer_sys::fuzz_target;
use perpend::{Rows, Scalar, orthogonality_error};
use tape::Tape;

fuzz_target!(|bytes: &[u8]| {
    let mut tape = Tape::new(bytes);
    match tape.byte() % 6 {
        0 => basis::run::<f64>(&mut tape),
        1 => basis::run::<f32>(&mut tape),
        2 => tracker::run::<f64>(&mut tape),
        3 => tracker::run::<f32>(&mut tape),
        4 => watch::run::<f64>(&mut tape),
        _ => watch::run::<f32>(&mut tape),
    }
});

/// Rows are finite and orthonormal to what is promised.
fn check_orthonormal<T: Scalar>(rows: Rows<'_, T>) {
    check_orthonormal_to(rows, 10.0 * (rows.count() as f64).sqrt());
}

/// The same to `most` times eps.
fn check_orthonormal_to<T: Scalar>(rows: Rows<'_, T>, most: f64) {
    assert!(rows.iter().flatten().all(|entry| entry.to_f64().is_finite()));
    let error = orthogonality_error(rows).expect("a figure");
    let most = most * T::EPSILON;
    assert!(error <= most, "{error:e} from orthonormal, at most {most:e} is promised");
}
