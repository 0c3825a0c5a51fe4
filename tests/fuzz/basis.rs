//! A basis beside the plain list of vectors it has accepted.

use perpend::basis::Tolerance;
use perpend::{Basis, Error, Scalar, State};

use super::check_orthonormal;
use super::tape::Tape;

pub fn run<T: Scalar>(tape: &mut Tape<'_>) {
    let dim = tape.between(1, 20);
    let capacity = tape.flag().then(|| tape.between(0, dim));
    let tolerance =
        tape.flag().then(|| Tolerance { relative: tape.number().abs(), absolute: tape.number().abs() });
    let mut basis = match Basis::<T>::new(dim, capacity, tolerance) {
        Ok(basis) => basis,
        Err(error) => {
            assert!(matches!(error, Error::Parameter { .. }), "{error:?}");
            return;
        }
    };
    let mut kept: Vec<Vec<f64>> = Vec::new();
    let mut changes = 0;
    while !tape.is_empty() {
        let before = basis.to_bytes().expect("a finite state");
        let refused = match tape.byte() % 6 {
            0 | 1 => {
                let vector = tape.row(dim);
                basis.add(&vector).map(|step| {
                    assert!(step.norm.is_finite() && step.residual_norm.is_finite());
                    if step.accepted() {
                        kept.push(vector);
                    }
                })
            }
            2 => {
                let rows = tape.rows(dim, 20);
                let mut steps = Vec::new();
                basis.add_rows(&rows, &mut steps).map(|()| {
                    let accepted = rows.chunks(dim).zip(&steps).filter(|(_, step)| step.accepted());
                    kept.extend(accepted.map(|(row, _)| row.to_vec()));
                })
            }
            3 => {
                let index = tape.between(0, dim);
                basis.drop(index).map(|()| drop(kept.remove(index)))
            }
            4 => basis.solve(&tape.row(dim)).map(|solution| {
                assert!(solution.weights.iter().all(|weight| weight.is_finite()));
            }),
            _ => {
                basis = Basis::from_bytes(&before).expect("its own state");
                basis.split(&tape.row(dim)).map(|split| assert!(split.residual_norm.is_finite()))
            }
        };
        if refused.is_err() {
            assert_eq!(basis.to_bytes().expect("a finite state"), before, "an error changes nothing");
        }
        changes += 1;
        check(&basis, &kept, changes);
    }
}

fn check<T: Scalar>(basis: &Basis<T>, kept: &[Vec<f64>], changes: usize) {
    let (rank, dim) = (basis.rank(), basis.dim());
    assert_eq!(rank, kept.len());
    assert!(rank <= basis.capacity());
    check_orthonormal(basis.vectors());
    let triangular = basis.triangular();
    assert!((0..rank).all(|index| triangular[index * rank + index] > 0.0), "a positive diagonal");
    for (column, vector) in kept.iter().enumerate() {
        let size = vector.iter().fold(0f64, |size, value| size.max(value.abs()));
        // Each drop turns the column once; below the normal numbers an absolute rounding is left.
        let most = 16.0 * T::EPSILON * (dim + changes) as f64 * size + 16.0 * dim as f64 * f64::from_bits(1);
        for (entry, value) in vector.iter().enumerate() {
            let parts = (0..=column).map(|row| {
                // Halved, so that sums near the largest number stay numbers.
                0.5 * triangular[row * rank + column] * basis.vectors().row(row)[entry].to_f64()
            });
            let error = 2.0 * (0.5 * value - parts.sum::<f64>()).abs();
            assert!(error <= most, "column {column}: off by {error:e}, at most {most:e}");
        }
    }
}
