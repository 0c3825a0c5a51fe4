//! Principal angles between two subspaces.
//!
//! Cosines are the singular values of `A B^T`; they lose small angles to rounding. Sines are those of what `A`
//! leaves of `B`, `B - (B A^T) A`; they lose right angles. Each angle is taken from the one that is accurate there
//! (Bjorck and Golub, Math. Comp. 27 (1973) 579-594; Knyazev and Argentati, SIAM J. Sci. Comput. 23 (2002)
//! 2008-2040).

use crate::dense::Svd;
use crate::error::Error;
use crate::ops;
use crate::rows::Rows;
use crate::scalar::Scalar;

/// Principal angles in radians, ascending, as many as the smaller subspace has dimensions. Rows of each are
/// orthonormal. `6 dim j k` flops and the decomposition of a `min(j, k)` by `dim` matrix.
///
/// # Errors
/// [`Error::Length`] where the rows differ in length.
pub fn principal_angles<A: Scalar, B: Scalar>(a: Rows<'_, A>, b: Rows<'_, B>) -> Result<Vec<f64>, Error> {
    if a.dim() != b.dim() {
        return Err(Error::Length { what: "vectors of the other", expected: a.dim(), got: b.dim() });
    }
    if a.count() < b.count() { ordered(b, a) } else { ordered(a, b) }
}

/// The same, `b` being the smaller.
fn ordered<A: Scalar, B: Scalar>(a: Rows<'_, A>, b: Rows<'_, B>) -> Result<Vec<f64>, Error> {
    let (dim, count) = (a.dim(), b.count());
    let mut products = vec![0.0; count * a.count()];
    let mut left = vec![0.0; count * dim];
    let mut row = vec![0.0; dim];
    for (index, entries) in b.iter().enumerate() {
        row.iter_mut().zip(entries).for_each(|(target, value)| *target = value.to_f64());
        let h = &mut products[index * a.count()..][..a.count()];
        ops::project(a, &row, h);
        ops::subtract(a, h, &row, &mut left[index * dim..][..dim]);
    }
    let mut cosines = Svd::new(count, a.count());
    cosines.decompose(&products)?;
    let mut sines = Svd::new(count, dim);
    sines.decompose(&left)?;
    // Cosines descend while angles ascend; sines descend, so the smallest angle takes the last.
    Ok(cosines
        .values()
        .iter()
        .zip(sines.values().iter().rev())
        .map(
            |(cosine, sine)| {
                if cosine * cosine > 0.5 { sine.min(1.0).asin() } else { cosine.min(1.0).acos() }
            },
        )
        .collect())
}
