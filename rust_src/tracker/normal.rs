//! Small symmetric positive systems, with a guard on what they determine.

/// Factors `a` in place by Cholesky; row-major, `size` squared, of which the lower triangle is used. A pivot of at most
/// `least` takes its unknown out; false where there is one. `size^3 / 3` flops.
pub(super) fn decompose(a: &mut [f64], size: usize, least: f64) -> bool {
    let mut determined = true;
    for row in 0..size {
        for column in 0..row {
            let sum: f64 = (0..column).map(|k| a[row * size + k] * a[column * size + k]).sum();
            a[row * size + column] = (a[row * size + column] - sum) * a[column * size + column];
        }
        let sum: f64 = (0..row).map(|k| a[row * size + k].powi(2)).sum();
        let square = a[row * size + row] - sum;
        // The reciprocal of the pivot is kept; 0 takes the unknown out.
        a[row * size + row] = if square > least { square.sqrt().recip() } else { 0.0 };
        determined &= square > least;
    }
    determined
}

/// Solves in place with the factor of [`decompose`]; unknowns taken out are 0. `2 size^2` flops.
pub(super) fn substitute(a: &[f64], x: &mut [f64]) {
    let size = x.len();
    for row in 0..size {
        let sum: f64 = (0..row).map(|k| a[row * size + k] * x[k]).sum();
        x[row] = (x[row] - sum) * a[row * size + row];
    }
    for row in (0..size).rev() {
        let sum: f64 = (row + 1..size).map(|k| a[k * size + row] * x[k]).sum();
        x[row] = (x[row] - sum) * a[row * size + row];
    }
}
