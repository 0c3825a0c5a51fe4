//! Missing channels: fitted, learned, late and dead.

use perpend::tracker::{Settings, Skipped};

use super::{Batch, Noise, forgotten, learn, plant};

#[test]
fn gaps_are_fitted_by_least_squares_on_what_is_observed() {
    let rows = plant(43, 300, 12, 3, 0.0);
    let mut tracker = learn::<f64>(Settings::new(12, 3), &rows);
    let mut row = plant(43, 301, 12, 3, 0.0).pop().unwrap();
    row[5] += 0.25;
    let (mut c, mut residual) = ([0.0; 3], [0.0; 12]);
    for gaps in [vec![2], vec![0, 7], vec![1, 3, 4, 8, 11], vec![0, 1, 2, 3, 4, 6, 7, 8]] {
        let mut gapped = row.clone();
        for &gap in &gaps {
            gapped[gap] = f64::NAN;
        }
        let split = tracker.split_into(&gapped, &mut c, &mut residual).unwrap();
        assert_eq!(split.missing, gaps.len());
        // Normal equations of the least-squares fit: the residual is orthogonal to the axes over the observed channels.
        let norm = residual.iter().map(|x| x * x).sum::<f64>().sqrt();
        for axis in tracker.axes().iter() {
            let product: f64 = axis.iter().zip(&residual).map(|(a, b)| a * b).sum();
            assert!(product.abs() < 1e-12, "{product:e} of {norm:e} with gaps {gaps:?}");
        }
        for &gap in &gaps {
            assert!(residual[gap] == 0.0);
        }
        for channel in (0..12).filter(|channel| !gaps.contains(channel)) {
            let model: f64 = tracker.axes().iter().zip(&c).map(|(axis, c)| axis[channel] * c).sum::<f64>()
                + tracker.mean()[channel];
            assert!((gapped[channel] - model - residual[channel]).abs() < 1e-12);
        }
        let scaled = norm * norm * 12.0 / (12 - gaps.len()) as f64;
        assert!((split.residual_norm_squared - scaled).abs() < 1e-13 * scaled);
    }
}

#[test]
fn a_row_learned_with_gaps_is_learned_as_the_model_completes_it() {
    let rows = plant(47, 400, 12, 3, 0.0);
    let settings = Settings { memory: Some(100.0), ..Settings::new(12, 3) };
    let (mut whole, mut gapped) = (learn::<f64>(settings, &rows[..50]), learn::<f64>(settings, &rows[..50]));
    for (index, row) in rows[50..].iter().enumerate() {
        whole.update(row, 1.0).unwrap();
        let mut row = row.clone();
        row[index % 12] = f64::NAN;
        row[(index * 5 + 1) % 12] = f64::NAN;
        assert!(gapped.update(&row, 1.0).unwrap().missing >= 1);
    }
    // Of exact rank, a row is completed to what it was.
    whole.refresh().unwrap();
    gapped.refresh().unwrap();
    for (got, expected) in gapped.energies().iter().zip(whole.energies()) {
        assert!((got - expected).abs() < 1e-8 * whole.energies()[0], "{got} against {expected}");
    }
}

#[test]
fn a_channel_that_arrives_late_brings_no_jump() {
    let mut rows = plant(53, 4000, 12, 3, 0.1);
    for (index, row) in rows.iter_mut().enumerate() {
        row[4] = if index < 1000 { f64::NAN } else { row[4] + 1e9 };
    }
    let settings = Settings { memory: Some(300.0), ..Settings::new(12, 3) };
    let mut tracker = learn::<f64>(settings, &rows[..1000]);
    tracker.refresh().unwrap();
    let before = tracker.total_energy();
    for row in &rows[1000..] {
        tracker.update(row, 1.0).unwrap();
        tracker.refresh().unwrap();
        assert!(tracker.total_energy() < 3.0 * before, "{} after {before}", tracker.total_energy());
    }
    let batch = Batch::of(&rows[1000..], &forgotten(3000, Some(300.0)), true);
    assert!((tracker.energies()[0] - batch.energies[0]).abs() < 0.01 * batch.energies[0]);
    assert!((tracker.mean()[4] - batch.mean[4]).abs() < 0.1);
}

#[test]
fn too_few_observed_channels_are_counted_and_skipped() {
    let rows = plant(59, 40, 6, 3, 0.1);
    let mut tracker = learn::<f64>(Settings::new(6, 3), &rows);
    let row = [1.0, f64::NAN, f64::NAN, 2.0, f64::NAN, f64::NAN];
    let update = tracker.update(&row, 1.0).unwrap();
    assert_eq!((update.skipped, update.missing), (Some(Skipped::Gaps), 4));
    assert_eq!((tracker.samples(), tracker.skipped()), (40, 1));
    let split = tracker.split_into(&[f64::NAN; 6], &mut [0.0; 3], &mut [0.0; 6]).unwrap();
    assert_eq!((split.residual_norm_squared, split.missing), (0.0, 6));
}

#[test]
fn a_dead_channel_and_dead_blocks_stop_no_learning() {
    // Channels 0 and 1 alone carry a source; both die, so nothing observed tells of it.
    let mut rows = plant(57, 3000, 12, 3, 0.1);
    let mut next = Noise(58);
    for (index, row) in rows.iter_mut().enumerate() {
        let source = 4.0 * next.next();
        let dead = index >= 1000;
        for channel in [0, 1] {
            row[channel] = if dead { f64::NAN } else { 7.0 + source + 0.01 * next.next() };
        }
        if index % 50 < 5 {
            row[2..8].fill(f64::NAN);
        }
    }
    let tracker = learn::<f64>(Settings { memory: Some(200.0), ..Settings::new(12, 4) }, &rows);
    assert_eq!((tracker.samples(), tracker.skipped()), (3000, 0));
    assert!(tracker.orthogonality_error().unwrap() <= 1e-14);
    // The dead channels keep the mean they had when last seen.
    assert!((tracker.mean()[0] - 7.0).abs() < 0.5, "{}", tracker.mean()[0]);
    let mut tracker = tracker;
    tracker.refresh().unwrap();
    // The channels that were never missing vary as they did.
    let plain: Vec<Vec<f64>> = plant(57, 3000, 12, 3, 0.1).iter().map(|row| row[8..].to_vec()).collect();
    let batch = Batch::of(&plain, &forgotten(3000, Some(200.0)), true);
    let trace: f64 = batch.energies.iter().sum();
    let got: f64 = tracker
        .axes()
        .iter()
        .zip(tracker.energies())
        .map(|(axis, energy)| energy * axis[8..].iter().map(|x| x * x).sum::<f64>())
        .sum();
    assert!((got / trace - 1.0).abs() < 0.02, "{got} of {trace}");
}
