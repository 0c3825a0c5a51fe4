//! The growing basis: invariants after every operation, and decisions against an oracle of plain loops.

use perpend::basis::{Basis, Reason, Step, Tolerance};
use perpend::{Error, Scalar};
use proptest::prelude::*;

const EPS: f64 = f64::EPSILON;

/// Spectral norm of `I - Q Q^T` promised at any rank.
fn bound<T: Scalar>(rank: usize) -> f64 {
    10.0 * T::EPSILON * (rank.max(1) as f64).sqrt()
}

/// The three invariants: orthonormal, triangular with positive diagonal, and reconstructing what was accepted.
fn assert_holds<T: Scalar>(basis: &Basis<T>, accepted: &[Vec<f64>], cycles: usize) {
    let rank = basis.rank();
    assert_eq!(rank, accepted.len());
    let error = basis.orthogonality_error().unwrap();
    assert!(error <= bound::<T>(rank), "orthogonality {error:e} at rank {rank}");
    let r = basis.triangular();
    for (column, vector) in accepted.iter().enumerate() {
        assert!(r[column * rank + column] > 0.0);
        let size = vector.iter().fold(0.0_f64, |size, x| size.max(x.abs()));
        let slack = 8.0 * T::EPSILON * (rank + cycles + 1) as f64 * size * (basis.dim() as f64).sqrt();
        for (entry, &expected) in vector.iter().enumerate() {
            let got: f64 =
                (0..rank).map(|row| r[row * rank + column] * basis.vectors().row(row)[entry].to_f64()).sum();
            assert!((got - expected).abs() <= slack, "vector {column}: {got:e} against {expected:e}");
            assert!(rank == 0 || column == 0 || r[column * rank] == 0.0, "below the diagonal");
        }
    }
}

/// Distance of `v` from the span of `rows`, by projecting three times with plain loops.
fn plain_residual<T: Scalar>(basis: &Basis<T>, v: &[f64]) -> f64 {
    let mut w = v.to_vec();
    for _ in 0..3 {
        for row in basis.vectors().iter() {
            let h: f64 = row.iter().zip(&w).map(|(q, x)| q.to_f64() * x).sum();
            w.iter_mut().zip(row).for_each(|(x, q)| *x -= h * q.to_f64());
        }
    }
    w.iter().map(|x| x * x).sum::<f64>().sqrt()
}

#[derive(Clone, Debug)]
enum Operation {
    /// A fresh vector, by seed, times a power of ten.
    Add(u64, i32),
    /// A combination of those accepted.
    AddDependent(u64),
    /// A combination of those accepted and a fresh one 10^-k as long.
    AddNearly(u64, i32),
    AddZero,
    /// Fresh, dependent and zero vectors in one call.
    AddRows(u64, usize),
    Drop(usize),
}

fn operation() -> impl Strategy<Value = Operation> {
    prop_oneof![
        4 => (any::<u64>(), -3..4_i32).prop_map(|(seed, power)| Operation::Add(seed, power)),
        1 => any::<u64>().prop_map(Operation::AddDependent),
        2 => (any::<u64>(), 1..13_i32).prop_map(|(seed, digits)| Operation::AddNearly(seed, digits)),
        1 => Just(Operation::AddZero),
        2 => (any::<u64>(), 1..40_usize).prop_map(|(seed, count)| Operation::AddRows(seed, count)),
        3 => (0..40_usize).prop_map(Operation::Drop),
    ]
}

struct Noise(u64);

impl Noise {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(2_862_933_555_777_941_757).wrapping_add(3_037_000_493);
        (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
    }
    fn vector(&mut self, dim: usize) -> Vec<f64> {
        (0..dim).map(|_| self.next()).collect()
    }
    fn combination(&mut self, of: &[Vec<f64>], dim: usize) -> Vec<f64> {
        let mut sum = vec![0.0; dim];
        for vector in of {
            let weight = self.next();
            sum.iter_mut().zip(vector).for_each(|(s, x)| *s += weight * x);
        }
        sum
    }
}

fn run<T: Scalar>(dim: usize, operations: &[Operation]) {
    let mut basis = Basis::<T>::new(dim, None, None).unwrap();
    let mut accepted: Vec<Vec<f64>> = Vec::new();
    let mut drops = 0;
    for operation in operations {
        match operation {
            Operation::Add(seed, power) => {
                let v: Vec<f64> = Noise(*seed).vector(dim).iter().map(|x| x * 10f64.powi(*power)).collect();
                let plain = plain_residual(&basis, &v);
                let step = basis.add(&v).unwrap();
                let slack = 8.0 * T::EPSILON * (dim + step.rank) as f64 * step.norm;
                assert!(
                    (step.residual_norm - plain).abs() <= slack,
                    "{} against {plain}",
                    step.residual_norm
                );
                if step.accepted() {
                    accepted.push(v);
                }
            }
            Operation::AddDependent(seed) => {
                let v = Noise(*seed).combination(&accepted, dim);
                let step = basis.add(&v).unwrap();
                // A combination that all but cancels is only rounding: it may go either way.
                let cancelled = accepted.iter().any(|a| norm(a) > 1e2 * step.norm);
                assert!(!step.accepted() || cancelled, "{step:?}");
                if step.accepted() {
                    accepted.push(v);
                }
            }
            Operation::AddNearly(seed, digits) => {
                let mut noise = Noise(*seed);
                let mut v = noise.combination(&accepted, dim);
                let size = norm(&v).max(1.0);
                for x in &mut v {
                    *x += size * 10f64.powi(-digits) * noise.next();
                }
                if basis.add(&v).unwrap().accepted() {
                    accepted.push(v);
                }
            }
            Operation::AddZero => {
                assert_eq!(basis.add(&vec![0.0; dim]).unwrap().reason, Some(Reason::Zero));
            }
            Operation::AddRows(seed, count) => {
                let rows = mixed_rows(&mut Noise(*seed), &accepted, dim, *count);
                let mut steps = Vec::new();
                basis.add_rows(&rows.concat(), &mut steps).unwrap();
                for (row, step) in rows.into_iter().zip(&steps) {
                    if step.accepted() {
                        accepted.push(row);
                    }
                }
            }
            Operation::Drop(index) => {
                if *index < accepted.len() {
                    basis.drop(*index).unwrap();
                    accepted.remove(*index);
                    drops += 1;
                } else {
                    assert!(matches!(basis.drop(*index), Err(Error::Parameter { .. })));
                }
            }
        }
        assert_holds(&basis, &accepted, drops);
    }
}

fn norm(v: &[f64]) -> f64 {
    v.iter().map(|x| x * x).sum::<f64>().sqrt()
}

/// Fresh vectors, with a zero, a repetition and a combination among them.
fn mixed_rows(noise: &mut Noise, accepted: &[Vec<f64>], dim: usize, count: usize) -> Vec<Vec<f64>> {
    let mut rows: Vec<Vec<f64>> = Vec::new();
    for index in 0..count {
        let row = match index % 5 {
            2 => vec![0.0; dim],
            3 => rows[index - 2].clone(),
            4 => noise.combination(if accepted.is_empty() { &rows } else { accepted }, dim),
            _ => noise.vector(dim),
        };
        rows.push(row);
    }
    rows
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn any_sequence_of_operations_keeps_the_invariants(
        dim in prop_oneof![1..9_usize, 30..34_usize],
        operations in prop::collection::vec(operation(), 1..40),
    ) {
        run::<f64>(dim, &operations);
        run::<f32>(dim, &operations);
    }

    #[test]
    fn add_rows_decides_as_one_add_after_another(seed in any::<u64>(), dim in 5..60_usize, count in 1..80_usize) {
        let rows = mixed_rows(&mut Noise(seed), &[], dim, count);
        let mut together = Basis::<f64>::new(dim, None, None).unwrap();
        let mut steps = Vec::new();
        together.add_rows(&rows.concat(), &mut steps).unwrap();
        let mut alone = Basis::<f64>::new(dim, None, None).unwrap();
        for (row, step) in rows.iter().zip(&steps) {
            let single = alone.add(row).unwrap();
            prop_assert_eq!(single.reason, step.reason);
            prop_assert_eq!(single.rank, step.rank);
            let slack = 8.0 * EPS * dim as f64 * single.norm;
            prop_assert!((single.residual_norm - step.residual_norm).abs() <= slack);
        }
    }
}

#[test]
fn a_window_that_slides_stays_orthonormal_and_keeps_its_factor() {
    let (dim, width) = (40, 12);
    let mut basis = Basis::<f64>::new(dim, Some(width), None).unwrap();
    let mut noise = Noise(7);
    let mut window: std::collections::VecDeque<Vec<f64>> = std::collections::VecDeque::new();
    for cycle in 0..20_000 {
        if window.len() == width {
            basis.drop(0).unwrap();
            window.pop_front();
        }
        let mut v = noise.vector(dim);
        if cycle % 3 == 0 {
            // Close to the vector before it: ill conditioned.
            if let Some(last) = window.back() {
                v.iter_mut().zip(last).for_each(|(x, y)| *x = y + 1e-9 * *x);
            }
        }
        assert!(basis.add(&v).unwrap().accepted());
        window.push_back(v);
    }
    assert_holds(&basis, window.make_contiguous(), width);
}

/// Rows of a block that lie close together, off the basis before it: what storing the first of them rounded must
/// not come back in the others, magnified.
fn add_close_rows<T: Scalar>(spread: f64) {
    let (dim, older, close) = (200, 30, 9);
    let mut noise = Noise(17);
    let mut basis = Basis::<T>::new(dim, None, None).unwrap();
    let mut steps = Vec::new();
    let first: Vec<f64> = (0..older).flat_map(|_| noise.vector(dim)).collect();
    basis.add_rows(&first, &mut steps).unwrap();
    let centre = noise.vector(dim);
    let rows: Vec<f64> = (0..close)
        .flat_map(|_| centre.iter().map(|x| x + spread * noise.next()).collect::<Vec<_>>())
        .collect();
    basis.add_rows(&rows, &mut steps).unwrap();
    assert_eq!(basis.rank(), older + close);
    let error = basis.orthogonality_error().unwrap();
    assert!(error <= bound::<T>(older + close), "spread {spread:e}: {error:e}");
}

#[test]
fn rows_close_together_in_one_block_come_out_orthonormal() {
    for spread in [1.0, 1e-1, 1e-2, 1e-3] {
        add_close_rows::<f64>(spread);
        add_close_rows::<f32>(spread);
    }
    for spread in [1e-5, 1e-8, 1e-11] {
        add_close_rows::<f64>(spread);
    }
}

#[test]
fn a_full_basis_says_so_and_still_measures() {
    let mut basis = Basis::<f64>::new(6, Some(2), None).unwrap();
    let mut noise = Noise(3);
    let (a, b, c) = (noise.vector(6), noise.vector(6), noise.vector(6));
    basis.add(&a).unwrap();
    basis.add(&b).unwrap();
    let step = basis.add(&c).unwrap();
    assert_eq!(step.reason, Some(Reason::Full));
    assert!((step.residual_norm - plain_residual(&basis, &c)).abs() <= 8.0 * EPS * step.norm);
    assert_eq!(basis.add(&a).unwrap().reason, Some(Reason::Dependent));
}

#[test]
fn vectors_of_any_scale_are_judged_alike() {
    let base: Vec<f64> = (0..9).map(|i| f64::from(i * i % 7) - 2.5).collect();
    let other: Vec<f64> = (0..9).map(|i| f64::from(i * 5 % 11) - 4.0).collect();
    let reference = judged(&base, &other);
    for power in [-1070, -1000, -500, -30, 30, 500, 1000, 1015] {
        let scale = |v: &[f64]| -> Vec<f64> {
            v.iter().map(|x| x * 2f64.powi(power / 2) * 2f64.powi(power - power / 2)).collect()
        };
        let scaled = judged(&scale(&base), &scale(&other));
        assert_eq!(scaled.0, reference.0, "decisions at 2^{power}");
        // Subnormal entries have few bits of their own.
        let bits = if power < -1022 { 2f64.powi(-1022 - power) * EPS } else { EPS };
        for (a, b) in scaled.1.iter().zip(&reference.1) {
            assert!((a - b).abs() <= 64.0 * bits, "direction at 2^{power}: {a} against {b}");
        }
    }
}

/// Decisions on two vectors and a sum of them, and the second basis vector.
fn judged(a: &[f64], b: &[f64]) -> (Vec<Option<Reason>>, Vec<f64>) {
    let mut basis =
        Basis::<f64>::new(a.len(), None, Some(Tolerance { relative: 1e-4, absolute: 0.0 })).unwrap();
    let sum: Vec<f64> = a.iter().zip(b).map(|(x, y)| x + y).collect();
    let reasons = [a, b, &sum].map(|v| basis.add(v).unwrap().reason).to_vec();
    assert!(basis.triangular().iter().all(|r| r.is_finite()));
    (reasons, basis.vectors().row(1).to_vec())
}

#[test]
fn one_huge_entry_hides_no_independent_direction_above_rounding() {
    let mut basis = Basis::<f64>::new(5, None, None).unwrap();
    assert!(basis.add(&[1e300, 0.0, 0.0, 0.0, 0.0]).unwrap().accepted());
    let step: Step = basis.add(&[1e300, 1e290, 0.0, 0.0, 0.0]).unwrap();
    assert!(step.accepted());
    assert!((step.residual_norm - 1e290).abs() <= 4.0 * EPS * 1e300);
    assert_eq!(basis.add(&[1e300, 1e280, 0.0, 0.0, 0.0]).unwrap().reason, Some(Reason::Dependent));
}

#[test]
fn a_bad_vector_is_refused_with_its_place_and_changes_nothing() {
    let mut basis = Basis::<f64>::new(4, None, None).unwrap();
    basis.add(&[0.5, -2.0, 3.5, 1.0]).unwrap();
    let before = format!("{:?}{:?}", basis.vectors(), basis.triangular());
    assert_eq!(basis.add(&[1.0; 3]), Err(Error::Length { what: "vector", expected: 4, got: 3 }));
    let infinite = basis.add(&[0.0, 1.0, f64::INFINITY, 0.0]);
    assert_eq!(infinite, Err(Error::NonFinite { what: "vector", index: 2, value: f64::INFINITY }));
    assert!(matches!(basis.add(&[f64::NAN; 4]), Err(Error::NonFinite { index: 0, .. })));
    assert_eq!(basis.add(&[f64::MAX; 4]), Err(Error::Overflow { what: "vector" }));
    let mut steps = Vec::new();
    let rows = [1.0, 0.0, 2.0, 0.5, 1.0, f64::NAN, 0.0, 0.0];
    assert!(matches!(basis.add_rows(&rows, &mut steps), Err(Error::InRow { row: 1, .. })));
    assert!(steps.is_empty());
    assert_eq!(before, format!("{:?}{:?}", basis.vectors(), basis.triangular()));
    assert!(basis.add(&[1.0, 1.0, -3.0, 2.0]).unwrap().accepted());
}

#[test]
fn solving_gives_back_the_weights_of_a_combination() {
    let mut basis = Basis::<f64>::new(30, None, None).unwrap();
    let mut noise = Noise(11);
    let vectors: Vec<Vec<f64>> = (0..7).map(|_| noise.vector(30)).collect();
    for v in &vectors {
        assert!(basis.add(v).unwrap().accepted());
    }
    let weights = noise.vector(7);
    let mut target = vec![0.0; 30];
    for (v, weight) in vectors.iter().zip(&weights) {
        target.iter_mut().zip(v).for_each(|(t, x)| *t += weight * x);
    }
    let solution = basis.solve(&target).unwrap();
    let condition = basis.condition().unwrap();
    for (got, expected) in solution.weights.iter().zip(&weights) {
        assert!((got - expected).abs() <= 64.0 * EPS * condition, "{got} against {expected}");
    }
    assert!(solution.residual_norm <= 64.0 * EPS * norm(&target));
}

#[test]
fn the_condition_is_the_same_at_every_scale() {
    let mut noise = Noise(19);
    let vectors: Vec<Vec<f64>> = (0..8).map(|_| noise.vector(20)).collect();
    let condition = |power: i32| {
        let mut basis = Basis::<f64>::new(20, None, None).unwrap();
        for v in &vectors {
            let scaled: Vec<f64> = v.iter().map(|x| x * 2f64.powi(power)).collect();
            assert!(basis.add(&scaled).unwrap().accepted());
        }
        basis.condition().unwrap()
    };
    let plain = condition(0);
    for power in [-900, -600, 600, 900] {
        assert!((condition(power) / plain - 1.0).abs() <= 64.0 * EPS, "at 2^{power}");
    }
}
