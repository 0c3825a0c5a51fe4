//! Two histories in one model.

use perpend::Error;
use perpend::tracker::{Settings, Tracker};

use super::{Batch, assert_equals, forgotten, learn, plant, rounding};

#[test]
fn merging_two_histories_equals_learning_both_where_nothing_is_truncated() {
    let rows = plant(89, 260, 8, 8, 0.1);
    for memory in [None, Some(70.0)] {
        let settings = Settings { guard: Some(5), memory, ..Settings::new(8, 3) };
        let mut first = learn::<f64>(settings, &rows[..100]);
        let mut second = Tracker::<f64>::new(settings).unwrap();
        for (index, row) in rows[100..].iter().enumerate() {
            second.update_after(row, 1.0, if index == 0 { 101.0 } else { 1.0 }).unwrap();
        }
        let batch = Batch::of(&rows, &forgotten(260, memory), true);
        let mut other_way = second.clone();
        first.merge(&second).unwrap();
        assert_equals(&mut first, &batch, rounding(260, 8));
        other_way.merge(&learn::<f64>(settings, &rows[..100])).unwrap();
        assert_equals(&mut other_way, &batch, rounding(260, 8));
        assert_eq!((first.samples(), first.clock()), (260, 260.0));
    }
}

#[test]
fn merging_unlike_models_is_refused() {
    let settings = Settings { memory: Some(50.0), ..Settings::new(8, 3) };
    let mut tracker = Tracker::<f64>::new(settings).unwrap();
    for other in [
        Settings { channels: 9, ..settings },
        Settings { rank: 2, ..settings },
        Settings { memory: None, ..settings },
        Settings { center: false, ..settings },
    ] {
        let other = Tracker::<f64>::new(other).unwrap();
        assert!(matches!(tracker.merge(&other), Err(Error::Unlike { .. })));
    }
}

#[test]
fn a_tree_of_merges_stays_within_the_certificate() {
    let (channels, rank) = (16, 3);
    let rows = plant(103, 800, channels, 8, 0.5);
    let settings = Settings { guard: Some(3), memory: Some(300.0), ..Settings::new(channels, rank) };
    let mut leaves: Vec<Tracker<f64>> = rows
        .chunks(100)
        .enumerate()
        .map(|(leaf, rows)| {
            let mut tracker = Tracker::new(settings).unwrap();
            for (index, row) in rows.iter().enumerate() {
                let elapsed = if index == 0 { 100.0 * leaf as f64 + 1.0 } else { 1.0 };
                tracker.update_after(row, 1.0, elapsed).unwrap();
            }
            tracker
        })
        .collect();
    while leaves.len() > 1 {
        leaves = leaves
            .chunks(2)
            .map(|pair| {
                let mut first = pair[0].clone();
                first.merge(&pair[1]).unwrap();
                first
            })
            .collect();
    }
    let mut merged = leaves.remove(0);
    let certificate = merged.certificate().unwrap();
    let batch = Batch::of(&rows, &forgotten(800, Some(300.0)), true);
    let slack = rounding(800, channels) * batch.energies[0];
    for (got, exact) in merged.energies().iter().zip(&batch.energies) {
        assert!(*got <= exact + slack && *exact <= got + certificate.lost + slack);
    }
    let trace: f64 = batch.energies.iter().sum();
    assert!((merged.total_energy() - trace).abs() < 1e-12 * trace);
    assert_eq!((merged.samples(), merged.clock()), (800, 800.0));
}
