//! The drifting subspace against batch decompositions of the weighted rows.

use faer::Mat;
use perpend::tracker::{Settings, Skipped, Tracker};
use perpend::{Error, principal_angles};

const EPS: f64 = f64::EPSILON;

struct Noise(u64);

impl Noise {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(2_862_933_555_777_941_757).wrapping_add(3_037_000_493);
        (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
    }
}

/// Rows of a few strong directions on noise, far from zero, slowly turning.
fn rows(count: usize, channels: usize, seed: u64) -> Vec<Vec<f64>> {
    let mut noise = Noise(seed);
    let patterns: Vec<Vec<f64>> = (0..3).map(|_| (0..channels).map(|_| noise.next()).collect()).collect();
    (0..count)
        .map(|tick| {
            let turn = tick as f64 / count as f64;
            let scores = [9.0 * noise.next(), 4.0 * noise.next(), 2.0 * noise.next()];
            (0..channels)
                .map(|channel| {
                    let signal: f64 = (0..3)
                        .map(|k| scores[k] * (patterns[k][channel] + turn * patterns[(k + 1) % 3][channel]))
                        .sum();
                    40.0 + signal + 0.1 * noise.next()
                })
                .collect()
        })
        .collect()
}

/// Weighted mean, energies and axes of the rows, by a full decomposition.
fn batch(rows: &[Vec<f64>], weights: &[f64], center: bool) -> (Vec<f64>, Vec<f64>, Vec<Vec<f64>>) {
    let channels = rows[0].len();
    let total: f64 = weights.iter().sum();
    let mean: Vec<f64> =
        (0..channels)
            .map(|c| {
                if center {
                    rows.iter().zip(weights).map(|(r, w)| r[c] * w).sum::<f64>() / total
                } else {
                    0.0
                }
            })
            .collect();
    let matrix =
        Mat::from_fn(rows.len(), channels, |i, j| (weights[i] / total).sqrt() * (rows[i][j] - mean[j]));
    let svd = matrix.thin_svd().unwrap();
    let size = rows.len().min(channels);
    let energies = (0..size).map(|i| svd.S()[i].powi(2)).collect();
    let axes = (0..size).map(|i| (0..channels).map(|j| svd.V()[(j, i)]).collect()).collect();
    (mean, energies, axes)
}

fn decayed(count: usize, memory: Option<f64>) -> Vec<f64> {
    let lambda = memory.map_or(1.0, |m| 1.0 - 1.0 / m);
    (0..count).map(|i| lambda.powi(i32::try_from(count - 1 - i).unwrap())).collect()
}

fn assert_equals_batch(rows: &[Vec<f64>], settings: Settings) {
    let channels = settings.channels;
    let mut tracker = Tracker::<f64>::new(settings).unwrap();
    for row in rows {
        assert!(tracker.update(row, 1.0).unwrap().learned());
    }
    tracker.refresh().unwrap();
    let (mean, energies, axes) = batch(rows, &decayed(rows.len(), settings.memory), settings.center);
    let slack = 64.0 * EPS * (rows.len() as f64).sqrt() * channels as f64;
    for (got, expected) in tracker.mean().iter().zip(&mean) {
        assert!((got - expected).abs() <= slack * expected.abs(), "mean {got} against {expected}");
    }
    for (index, (got, expected)) in tracker.energies().iter().zip(&energies).enumerate() {
        assert!((got - expected).abs() <= slack * energies[0], "energy {index}: {got} against {expected}");
        let next = energies.get(index + 1).copied().unwrap_or(0.0);
        let above = if index == 0 { f64::INFINITY } else { energies[index - 1] };
        let gap = (expected - next).min(above - expected);
        let cosine: f64 = tracker.axes().row(index).iter().zip(&axes[index]).map(|(a, b)| a * b).sum();
        assert!(1.0 - cosine.abs() <= slack * energies[0] / gap, "axis {index}: cosine {cosine}");
    }
    assert!(tracker.certificate().unwrap().lost.abs() <= 0.0, "nothing was given up");
    assert!(tracker.orthogonality_error().unwrap() <= 10.0 * EPS * (channels as f64).sqrt());
}

#[test]
fn nothing_forgotten_and_nothing_given_up_equals_the_batch_answer() {
    for (count, channels) in [(3, 7), (40, 7), (500, 12)] {
        let settings = Settings { guard: Some(channels - 3), ..Settings::new(channels, 3) };
        assert_equals_batch(&rows(count, channels, 5), settings);
        assert_equals_batch(&rows(count, channels, 5), Settings { center: false, ..settings });
    }
}

#[test]
fn with_forgetting_it_equals_the_batch_answer_of_the_weighted_rows() {
    for memory in [2.5, 30.0, 1e4] {
        let settings = Settings { guard: Some(7), memory: Some(memory), ..Settings::new(10, 3) };
        assert_equals_batch(&rows(400, 10, 9), settings);
    }
}

#[test]
fn the_exact_answer_lies_within_the_certificate() {
    let (count, channels) = (600, 20);
    let rows = rows(count, channels, 3);
    for (guard, memory) in [(0, 40.0), (3, 40.0), (8, 100.0)] {
        let settings = Settings { guard: Some(guard), memory: Some(memory), ..Settings::new(channels, 3) };
        let mut tracker = Tracker::<f64>::new(settings).unwrap();
        for row in &rows {
            tracker.update(row, 1.0).unwrap();
        }
        let certificate = tracker.certificate().unwrap();
        let (_, energies, axes) = batch(&rows, &decayed(count, Some(memory)), true);
        let slack = 1e3 * EPS * energies[0];
        for (got, exact) in tracker.energies().iter().zip(&energies) {
            assert!(*got <= exact + slack && *exact <= got + certificate.lost + slack);
        }
        // The trace of what is lacking is what was given up.
        let held = tracker.total_energy() - certificate.lost;
        let lacking = energies.iter().sum::<f64>() - held;
        assert!((lacking - certificate.lost).abs() <= 1e-9 * lacking.max(energies[0]));
        if let Some(sine) = certificate.sine {
            let mut exact = perpend::RowStore::<f64>::zeros(3, channels);
            (0..3).for_each(|i| exact.row_mut(i).copy_from_slice(&axes[i]));
            let angle = principal_angles(tracker.axes(), exact.view(3)).unwrap()[2];
            assert!(angle.sin() <= sine + 1e3 * EPS, "{} against {sine}", angle.sin());
        }
    }
}

#[test]
fn a_hundred_thousand_rows_cost_no_orthonormality() {
    let rows = rows(1000, 16, 8);
    let mut wide = Tracker::<f64>::new(Settings { memory: Some(200.0), ..Settings::new(16, 3) }).unwrap();
    let mut narrow = Tracker::<f32>::new(Settings { memory: Some(200.0), ..Settings::new(16, 3) }).unwrap();
    for tick in 0..100_000 {
        wide.update(&rows[tick % 1000], 1.0).unwrap();
        narrow.update(&rows[tick % 1000], 1.0).unwrap();
    }
    assert!(wide.orthogonality_error().unwrap() <= 10.0 * EPS * 11f64.sqrt());
    assert!(narrow.orthogonality_error().unwrap() <= 10.0 * f64::from(f32::EPSILON) * 11f64.sqrt());
}

#[test]
fn gaps_are_filled_by_least_squares_on_the_observed_channels() {
    let (channels, rank) = (12, 3);
    let training = rows(300, channels, 21);
    let mut tracker = Tracker::<f64>::new(Settings::new(channels, rank)).unwrap();
    for row in &training {
        tracker.update(row, 1.0).unwrap();
    }
    tracker.refresh().unwrap();
    for gaps in [vec![4], vec![0, 5], vec![1, 2, 3, 7, 8, 9]] {
        let mut row = training[299].clone();
        for &gap in &gaps {
            row[gap] = f64::NAN;
        }
        let (mut c, mut residual) = (vec![0.0; rank], vec![0.0; channels]);
        let split = tracker.split_into(&row, &mut c, &mut residual).unwrap();
        assert!(split.determined && split.missing == gaps.len());
        let observed: Vec<usize> = (0..channels).filter(|i| !gaps.contains(i)).collect();
        let a = Mat::from_fn(observed.len(), rank, |i, j| tracker.axes().row(j)[observed[i]]);
        let b = Mat::from_fn(observed.len(), 1, |i, _| row[observed[i]] - tracker.mean()[observed[i]]);
        let fitted = least_squares(&a, &b);
        for j in 0..rank {
            assert!((c[j] - fitted[(j, 0)]).abs() <= 1e4 * EPS * 50.0, "{} against {}", c[j], fitted[(j, 0)]);
        }
        assert!(gaps.iter().all(|&gap| residual[gap] == 0.0));
    }
}

/// Through the thin decomposition of `a`.
fn least_squares(a: &Mat<f64>, b: &Mat<f64>) -> Mat<f64> {
    let svd = a.thin_svd().unwrap();
    let mut scores = svd.U().transpose() * b;
    for i in 0..a.ncols() {
        scores[(i, 0)] /= svd.S()[i];
    }
    svd.V() * scores
}

#[test]
fn two_histories_merge_into_that_of_all_rows() {
    let channels = 9;
    let all = rows(120, channels, 13);
    let settings = Settings { guard: Some(6), ..Settings::new(channels, 3) };
    let mut whole = Tracker::<f64>::new(settings).unwrap();
    let mut first = Tracker::<f64>::new(settings).unwrap();
    let mut second = Tracker::<f64>::new(settings).unwrap();
    for (index, row) in all.iter().enumerate() {
        whole.update(row, 1.0).unwrap();
        if index < 50 { first.update(row, 1.0) } else { second.update(row, 1.0) }.unwrap();
    }
    first.merge(&second).unwrap();
    assert_eq!(first.samples(), 120);
    whole.refresh().unwrap();
    first.refresh().unwrap();
    for (got, expected) in first.energies().iter().zip(whole.energies()) {
        assert!((got - expected).abs() <= 1e3 * EPS * whole.energies()[0]);
    }
    let angle = first.angles(&mut whole).unwrap()[2];
    assert!(angle <= 1e5 * EPS, "{angle:e}");
    let other = Tracker::<f64>::new(Settings::new(channels, 2)).unwrap();
    assert!(matches!(first.merge(&other), Err(Error::Unlike { what: "rank", .. })));
}

#[test]
fn a_bad_row_is_refused_with_its_place_and_changes_nothing() {
    let mut tracker = Tracker::<f64>::new(Settings::new(4, 2)).unwrap();
    let good = rows(20, 4, 2);
    for row in &good {
        tracker.update(row, 1.0).unwrap();
    }
    let mut twin = tracker.clone();
    assert!(matches!(tracker.update(&[1.0; 3], 1.0), Err(Error::Length { expected: 4, got: 3, .. })));
    assert!(matches!(
        tracker.update(&[1.0, 2.0, f64::NEG_INFINITY, 0.0], 1.0),
        Err(Error::NonFinite { index: 2, .. })
    ));
    assert!(matches!(tracker.update(&[1.0; 4], -1.0), Err(Error::Parameter { name: "weight", .. })));
    let skipped = tracker.update(&[f64::NAN, f64::NAN, f64::NAN, 1.0], 1.0).unwrap();
    assert_eq!(skipped.skipped, Some(Skipped::Gaps));
    assert_eq!(tracker.skipped(), 1);
    tracker.update(&good[0], 1.0).unwrap();
    twin.update(&good[0], 1.0).unwrap();
    tracker.refresh().unwrap();
    twin.refresh().unwrap();
    assert_eq!(tracker.energies(), twin.energies());
    assert_eq!(tracker.mean(), twin.mean());
}

#[test]
fn silence_and_return_leave_everything_finite() {
    let settings = Settings { memory: Some(20.0), ..Settings::new(6, 2) };
    let mut tracker = Tracker::<f64>::new(settings).unwrap();
    let moving = rows(100, 6, 4);
    for row in &moving {
        tracker.update(row, 1.0).unwrap();
    }
    for _ in 0..50_000 {
        tracker.update(&moving[0], 1.0).unwrap();
    }
    for row in &moving {
        tracker.update(row, 1.0).unwrap();
    }
    tracker.refresh().unwrap();
    let (_, energies, _) = batch(&moving, &decayed(100, Some(20.0)), true);
    assert!(tracker.energies().iter().all(|energy| energy.is_finite()));
    assert!((tracker.energies()[0] / energies[0] - 1.0).abs() < 0.5);
    assert!(tracker.orthogonality_error().unwrap() <= 10.0 * EPS * 6f64.sqrt());
}
