//! What is refused leaves the tracker as it was.

use perpend::Error;
use perpend::tracker::{Settings, Skipped, Tracker};

use super::{learn, plant};

/// All that a tracker answers, as bits.
fn answers(tracker: &Tracker<f64>) -> Vec<u64> {
    let mut copy = tracker.clone();
    copy.refresh().unwrap();
    let axes: Vec<f64> = copy.axes().iter().flatten().copied().collect();
    let mut all = vec![copy.total_energy(), copy.total_weight(), copy.clock(), copy.samples() as f64];
    all.extend(copy.mean().iter().chain(copy.energies()).chain(copy.guard_energies()).chain(&axes));
    all.into_iter().map(f64::to_bits).collect()
}

#[test]
fn errors_and_rows_without_weight_leave_the_tracker_as_it_was() {
    let rows = plant(61, 50, 6, 3, 0.1);
    let mut tracker = learn::<f64>(Settings { memory: Some(20.0), ..Settings::new(6, 2) }, &rows);
    let before = answers(&tracker);
    let mut bad = rows[0].clone();
    bad[4] = f64::NEG_INFINITY;
    bad[1] = f64::NAN;
    assert_eq!(
        tracker.update(&bad, 1.0),
        Err(Error::NonFinite { what: "row", index: 4, value: f64::NEG_INFINITY })
    );
    assert!(matches!(tracker.update(&rows[0][1..], 1.0), Err(Error::Length { expected: 6, got: 5, .. })));
    assert!(matches!(tracker.update(&rows[0], -1.0), Err(Error::Parameter { name: "weight", .. })));
    assert!(matches!(tracker.update(&rows[0], f64::NAN), Err(Error::Parameter { name: "weight", .. })));
    assert!(matches!(
        tracker.update_after(&rows[0], 1.0, f64::INFINITY),
        Err(Error::Parameter { name: "elapsed", .. })
    ));
    assert!(matches!(tracker.update(&[1e300; 6], 1.0), Err(Error::Overflow { .. })));
    assert!(matches!(tracker.update(&[f64::MAX; 6], 1.0), Err(Error::Overflow { .. })));
    assert_eq!(tracker.update(&rows[1], 0.0).unwrap().skipped, Some(Skipped::Weight));
    assert_eq!(answers(&tracker), before);
    tracker.update(&rows[1], 1.0).unwrap();
    assert_ne!(answers(&tracker), before);
}

#[test]
fn a_split_whose_residual_squares_to_no_number_is_an_error() {
    let rows = plant(61, 50, 6, 3, 0.1);
    let mut tracker = learn::<f64>(Settings::new(6, 2), &rows);
    let before = answers(&tracker);
    let (mut coefficients, mut residual) = (vec![0.0; 2], vec![0.0; 6]);
    for gap in [0.5, f64::NAN] {
        let row = [1e200, -1e190, 2.0, 0.25, gap, -1e200];
        let split = tracker.split_into(&row, &mut coefficients, &mut residual);
        assert!(matches!(split, Err(Error::Overflow { .. })), "{split:?}");
        assert!(matches!(tracker.reconstruct_into(&row, &mut residual), Err(Error::Overflow { .. })));
    }
    assert_eq!(answers(&tracker), before);
}

#[test]
fn settings_out_of_range_are_refused_by_name() {
    let base = Settings::new(6, 2);
    for (settings, name) in [
        (Settings { rank: 0, ..base }, "rank"),
        (Settings { rank: 7, ..base }, "rank"),
        (Settings { guard: Some(5), ..base }, "guard"),
        (Settings { memory: Some(1.0), ..base }, "memory"),
        (Settings { memory: Some(f64::NAN), ..base }, "memory"),
    ] {
        let error = Tracker::<f64>::new(settings).err().unwrap();
        assert!(matches!(error, Error::Parameter { name: found, .. } if found == name), "{error}");
    }
}
