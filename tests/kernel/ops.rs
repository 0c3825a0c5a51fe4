//! The sweeps on every path, against loops too plain to be wrong.

use perpend::ops::{End, Path};
use perpend::{RowStore, Scalar};
use proptest::prelude::*;

/// Rounding of a sum of `n` products of magnitude at most `size`, computed in any order.
fn slack(n: usize, size: f64) -> f64 {
    4.0 * f64::EPSILON * (n as f64 + 4.0) * (size + f64::MIN_POSITIVE)
}

fn store<T: Scalar>(rows: &[Vec<f64>], dim: usize) -> RowStore<T> {
    let mut store = RowStore::zeros(rows.len(), dim);
    for (index, row) in rows.iter().enumerate() {
        for (target, &value) in store.row_mut(index).iter_mut().zip(row) {
            *target = T::from_f64(value);
        }
    }
    store
}

fn entries(n: usize) -> impl Strategy<Value = Vec<f64>> {
    prop::collection::vec(-1e3..1e3_f64, n)
}

/// Up to 21 rows of up to 2100 entries: past each group size, each register's rest and the block length.
fn case() -> impl Strategy<Value = (Vec<Vec<f64>>, Vec<f64>, Vec<f64>)> {
    (prop_oneof![0..40_usize, 2030..2100_usize], 0..22_usize).prop_flat_map(|(dim, count)| {
        (prop::collection::vec(entries(dim), count), entries(dim), entries(count + 1))
    })
}

fn plain_dot<T: Scalar>(row: &[T], x: &[f64]) -> (f64, f64) {
    let products: Vec<f64> = row.iter().zip(x).map(|(a, b)| a.to_f64() * b).collect();
    (products.iter().sum(), products.iter().map(|p| p.abs()).sum())
}

fn sweeps_agree<T: Scalar>(path: Path, rows: &[Vec<f64>], v: &[f64], u: &[f64]) {
    let (dim, count) = (v.len(), rows.len());
    let mut q = store::<T>(rows, dim);
    for end in [End::Back, End::Front] {
        let mut h = vec![f64::NAN; count];
        let squares = path.project_from(end, q.view(count), v, &mut h);
        let (plain, size) = plain_dot(v, v);
        assert!((squares - plain).abs() <= slack(dim, size));
        for (index, &got) in h.iter().enumerate() {
            let (plain, size) = plain_dot(q.row(index), v);
            assert!((got - plain).abs() <= slack(dim, size), "project: {got} against {plain}");
        }
    }

    let coefficients = &u[..count];
    let mut w = vec![f64::NAN; dim];
    let mut s = vec![f64::NAN; count];
    let measured = path.subtract_measured(q.view(count), coefficients, v, &mut w, &mut s);
    let mut from_front = vec![f64::NAN; dim];
    let mut left = vec![f64::NAN; count];
    path.subtract_measured_from(End::Front, q.view(count), coefficients, v, &mut from_front, &mut left);
    assert_eq!(from_front, w);
    for ((index, got), back) in left.iter().enumerate().zip(&s) {
        let (_, size) = plain_dot(q.row(index), &w);
        assert!(
            (got - back).abs() <= slack(dim, size),
            "measure: {got} from the front, {back} from the back"
        );
    }
    for column in 0..dim {
        let terms: Vec<f64> = (0..count).map(|i| coefficients[i] * q.row(i)[column].to_f64()).collect();
        let plain = v[column] - terms.iter().sum::<f64>();
        let size = v[column].abs() + terms.iter().map(|t| t.abs()).sum::<f64>();
        assert!((w[column] - plain).abs() <= slack(count, size), "subtract: {} against {plain}", w[column]);
    }
    for (index, &got) in s.iter().enumerate() {
        let (plain, size) = plain_dot(q.row(index), &w);
        assert!((got - plain).abs() <= slack(dim, size), "measure: {got} against {plain}");
    }
    let mut alone = vec![f64::NAN; dim];
    assert_eq!(path.subtract(q.view(count), coefficients, v, &mut alone).to_bits(), measured.to_bits());
    assert_eq!(alone, w);
    let mut in_place = v.to_vec();
    let mut again = vec![f64::NAN; count];
    path.subtract_measured_in_place(q.view(count), coefficients, &mut in_place, &mut again);
    assert_eq!((in_place, again), (w, s));

    blocks_agree::<T>(path, &q, v, u);
    reflects::<T>(path, &mut q, v, u);
}

/// A block of vectors against the same vectors one by one.
fn blocks_agree<T: Scalar>(path: Path, q: &RowStore<T>, v: &[f64], u: &[f64]) {
    let (dim, rank) = (q.dim(), q.rows());
    let q = q.view(rank);
    for count in [1_usize, 3, 4, 7, 8, 17] {
        let many: Vec<f64> = (0..count).flat_map(|i| v.iter().map(move |x| x * (1.0 + i as f64))).collect();
        let mut h = vec![f64::NAN; count * rank];
        path.project_block(q, &many, count, &mut h);
        let factors: Vec<f64> = (0..count * rank).map(|i| u[i % rank.max(1)]).collect();
        let mut w = vec![f64::NAN; count * dim];
        let mut s = vec![f64::NAN; count * rank];
        path.subtract_block(q, &factors, &many, &mut w, count, &mut s);
        let mut in_place = many.clone();
        let mut again = vec![f64::NAN; count * rank];
        path.subtract_block_in_place(q, &factors, &mut in_place, count, &mut again);
        assert_eq!((&in_place, &again), (&w, &s));
        let mut combined = many.clone();
        path.combine_block(q, &factors, &mut combined, count);
        assert_eq!(combined, w);
        for index in 0..count {
            let x = &many[index * dim..][..dim];
            for (row, &got) in h[index * rank..][..rank].iter().enumerate() {
                let (plain, size) = plain_dot(q.row(row), x);
                assert!((got - plain).abs() <= slack(dim, size), "block project: {got} against {plain}");
            }
            let mut alone = vec![f64::NAN; dim];
            path.subtract(q, &factors[index * rank..][..rank], x, &mut alone);
            let out = &w[index * dim..][..dim];
            for (column, (&got, &plain)) in out.iter().zip(&alone).enumerate() {
                let size: f64 =
                    (0..rank).map(|r| (factors[index * rank + r] * q.row(r)[column].to_f64()).abs()).sum();
                assert!((got - plain).abs() <= slack(rank, size + x[column].abs()), "block subtract");
            }
            for (row, &got) in s[index * rank..][..rank].iter().enumerate() {
                let (plain, size) = plain_dot(q.row(row), out);
                assert!((got - plain).abs() <= slack(dim, size), "block measure: {got} against {plain}");
            }
        }
    }
}

fn reflects<T: Scalar>(path: Path, q: &mut RowStore<T>, extra: &[f64], u: &[f64]) {
    let norm = u.iter().map(|x| x * x).sum::<f64>().sqrt().max(f64::MIN_POSITIVE);
    let unit: Vec<f64> = u.iter().map(|x| x / norm).collect();
    let before = q.clone();
    // Along weights of its own the same sweep reflects what the weights make of the rows.
    let along: Vec<f64> = unit.iter().map(|x| 0.5 - x).collect();
    let mut other = q.clone();
    let (rows, stride) = other.parts_mut();
    path.reflect_along(End::Back, rows, stride, &unit, &along, extra);
    assert_reflected(&before, &other, extra, &unit, &along);
    let (rows, stride) = q.parts_mut();
    path.reflect(rows, stride, &unit, extra);
    assert_reflected(&before, q, extra, &unit, &unit);
}

/// Each row less `2 unit_i g`, with `g` summed along `along`.
fn assert_reflected<T: Scalar>(
    before: &RowStore<T>,
    after: &RowStore<T>,
    extra: &[f64],
    unit: &[f64],
    along: &[f64],
) {
    let count = before.rows();
    for (column, &last) in extra.iter().enumerate() {
        let all: Vec<f64> = (0..count).map(|i| before.row(i)[column].to_f64()).chain([last]).collect();
        let g: f64 = all.iter().zip(along).map(|(a, b)| a * b).sum();
        let size = 2.0 * all.iter().map(|a| a.abs()).sum::<f64>();
        for index in 0..count {
            let plain = all[index] - 2.0 * unit[index] * g;
            let got = after.row(index)[column].to_f64();
            assert!(
                (got - plain).abs() <= slack(count, size) + 4.0 * T::EPSILON * size,
                "{got} against {plain}"
            );
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(96))]

    #[test]
    fn every_path_computes_what_plain_loops_compute((rows, v, u) in case()) {
        for path in Path::available() {
            sweeps_agree::<f64>(path, &rows, &v, &u);
            sweeps_agree::<f32>(path, &rows, &v, &u);
        }
    }

    #[test]
    fn a_rotation_turns_both_rows_and_nothing_else(x in entries(19), angle in 0.0..7.0_f64) {
        for path in Path::available() {
            let mut pair = store::<f64>(&[x.clone(), x.iter().rev().copied().collect()], 19);
            let before = pair.clone();
            let (first, second) = pair.pair_mut(0, 1);
            path.rotate(first, second, angle.cos(), angle.sin());
            for i in 0..19 {
                let (a, b) = (before.row(0)[i], before.row(1)[i]);
                prop_assert!((pair.row(0)[i] - (angle.cos() * a + angle.sin() * b)).abs() <= slack(2, 2e3));
                prop_assert!((pair.row(1)[i] - (angle.cos() * b - angle.sin() * a)).abs() <= slack(2, 2e3));
            }
        }
    }

    /// Up to 40 rows: past every register's width. What is kept beside the triangle is no part of it.
    #[test]
    fn a_triangle_times_its_inverse_is_the_identity(
        (size, more) in (1..40_usize, 0..3_usize),
        scale in 0.5..4.0_f64,
        seed in prop::collection::vec(-1.0..1.0_f64, 40 * 43),
    ) {
        let stride = size + more;
        let triangle = &seed[..size * stride];
        let pivots: Vec<f64> = (0..size).map(|row| 0.5 + triangle[row * stride + row]).collect();
        prop_assume!(pivots.iter().all(|pivot| pivot.abs() > 1e-3));
        let entry = |row: usize, column: usize| {
            if row == column { pivots[row] } else { triangle[row * stride + column] }
        };
        for path in Path::available() {
            let mut inverse = RowStore::<f64>::zeros(size, size);
            let (out, out_stride) = inverse.parts_mut();
            let longest = path.invert_triangle(triangle, stride, &pivots, scale, out, out_stride);
            let norm = |row: usize| inverse.row(row).iter().map(|x| x * x).sum::<f64>();
            for row in 0..size {
                prop_assert!(norm(row) <= norm(longest) * (1.0 + slack(size, 1.0)));
                for column in 0..size {
                    if column < row {
                        prop_assert!(inverse.row(row)[column].abs() < f64::MIN_POSITIVE);
                        continue;
                    }
                    let terms: Vec<f64> =
                        (row..=column).map(|k| entry(row, k) * inverse.row(k)[column]).collect();
                    let expected = if row == column { scale } else { 0.0 };
                    let magnitude = terms.iter().map(|term| term.abs()).sum::<f64>();
                    prop_assert!((terms.iter().sum::<f64>() - expected).abs() <= slack(size, magnitude));
                }
            }
        }
    }

    #[test]
    fn normalizing_gives_unit_length_in_the_stored_type(x in prop::collection::vec(0.5..2.0_f64, 1..80)) {
        let norm = x.iter().map(|a| a * a).sum::<f64>().sqrt();
        for path in Path::available() {
            let mut unit = vec![0.0_f32; x.len()];
            path.normalize_into(norm, &x, &mut unit);
            for (got, value) in unit.iter().zip(&x) {
                prop_assert!((f64::from(*got) - value / norm).abs() <= f64::from(f32::EPSILON) * value / norm);
            }
        }
    }
}

#[test]
fn the_forced_path_is_the_one_in_use() {
    if let Ok(name) = std::env::var(perpend::ops::VARIABLE) {
        assert_eq!(Path::current().name(), name);
    } else {
        assert_eq!(Path::current().name(), Path::available()[0].name());
    }
}
