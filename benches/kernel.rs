//! Times the kernel's sweeps against this machine's own read rate, on the shapes of `cases.csv`.
//!
//! Every answer is asserted before it is timed. `cargo bench` times; `cargo bench -- --check` runs each case once.
#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    reason = "a bench stops where it finds a surprise"
)]

use std::hint::black_box;
use std::time::Instant;

use perpend::{Basis, ops};

/// Entries of the long product that gives the read rate of memory: 256 MB, past any cache of one's own.
const LONG: usize = 32_000_000;

fn main() {
    let check = std::env::args().any(|argument| argument == "--check");
    let repeats = if check { 1 } else { 31 };
    println!("kernel path: {}", ops::Path::current().name());
    let rate = if check { f64::NAN } else { read_rate(if check { 1 } else { 9 }) };
    println!("read rate, a dot product over {} MB: {rate:.1} GB/s", LONG * 8 / 1_000_000);
    println!(
        "{:>8} {:>5} {:>12} {:>10} {:>12} {:>10}",
        "dim", "rank", "split us", "sweeps", "GB/s", "of rate"
    );
    for (dim, rank) in cases() {
        let (mut basis, vector) = filled(dim, rank);
        assert_answer(&mut basis, &vector);
        let passes = basis.split(&vector).unwrap().passes;
        let seconds = median(repeats, inner(dim * rank, check), || {
            black_box(basis.split(black_box(&vector)).unwrap());
        });
        let sweeps = f64::from(1 + passes);
        let speed = sweeps * (dim * rank * 8) as f64 / seconds / 1e9;
        println!(
            "{dim:>8} {rank:>5} {:>12.3} {sweeps:>10} {speed:>12.1} {:>9.0}%",
            seconds * 1e6,
            100.0 * speed / rate
        );
    }
}

/// The shapes both benches run.
fn cases() -> Vec<(usize, usize)> {
    include_str!("cases.csv")
        .lines()
        .skip(1)
        .map(|line| {
            let (dim, rank) = line.split_once(',').expect("two columns");
            (dim.parse().expect("a number"), rank.parse().expect("a number"))
        })
        .collect()
}

/// Calls in one timing: enough for a few milliseconds.
fn inner(size: usize, check: bool) -> usize {
    if check { 1 } else { (4_000_000 / size).max(1) }
}

/// Reproducible entries in -1..1 (the multiplier of L'Ecuyer, Math. Comp. 68 (1999) 249-260).
fn noise(state: &mut u64) -> f64 {
    *state = state.wrapping_mul(2_862_933_555_777_941_757).wrapping_add(3_037_000_493);
    (*state >> 11) as f64 / (1u64 << 52) as f64 - 1.0
}

fn filled(dim: usize, rank: usize) -> (Basis<f64>, Vec<f64>) {
    let mut state = 20_261_201;
    let mut basis = Basis::new(dim, Some(rank), None).unwrap();
    let mut vector = vec![0.0; dim];
    for _ in 0..rank {
        vector.fill_with(|| noise(&mut state));
        assert!(basis.add(&vector).unwrap().accepted());
    }
    vector.fill_with(|| noise(&mut state));
    (basis, vector)
}

/// The residual is orthogonal to the basis and, with the coefficients, gives the vector back.
fn assert_answer(basis: &mut Basis<f64>, vector: &[f64]) {
    let split = basis.split(vector).unwrap();
    let scale = split.norm * f64::EPSILON * (basis.rank() as f64 + 8.0);
    let mut back = basis.residual().to_vec();
    for (row, &h) in basis.vectors().iter().zip(basis.coefficients()) {
        assert!(ops::dot(row, basis.residual()).abs() <= scale);
        back.iter_mut().zip(row).for_each(|(target, q)| *target += h * q);
    }
    assert!(back.iter().zip(vector).all(|(a, b)| (a - b).abs() <= scale));
}

/// Bytes a second of a dot product of two long vectors, in GB/s.
fn read_rate(repeats: usize) -> f64 {
    let x = vec![1.0; LONG];
    let y = vec![0.5; LONG];
    assert!((ops::dot(&x, &y) - LONG as f64 / 2.0).abs() < 0.5);
    let seconds = median(repeats, 1, || {
        black_box(ops::dot(black_box(&x), black_box(&y)));
    });
    2.0 * (LONG * 8) as f64 / seconds / 1e9
}

/// Median over `repeats` of the seconds a call takes, each the mean of `inner` calls.
fn median(repeats: usize, inner: usize, mut call: impl FnMut()) -> f64 {
    let mut seconds: Vec<f64> = (0..repeats)
        .map(|_| {
            let start = Instant::now();
            for _ in 0..inner {
                call();
            }
            start.elapsed().as_secs_f64() / inner as f64
        })
        .collect();
    seconds.sort_by(f64::total_cmp);
    seconds[repeats / 2]
}
