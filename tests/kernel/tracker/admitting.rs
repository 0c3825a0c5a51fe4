//! A channel that had no part so far.

use perpend::Error;
use perpend::tracker::Settings;

use super::{Batch, assert_equals, forgotten, learn, plant, rounding};

#[test]
fn an_admitted_channel_equals_one_that_moved_with_the_others_all_along() {
    let loadings = [0.7, 0.0, -0.4, 9.0, 0.0, 1.3, 0.0, -0.2];
    let mut rows = plant(107, 200, 8, 8, 0.1);
    for row in &mut rows {
        row[3] = 0.0;
    }
    for memory in [None, Some(70.0)] {
        let settings = Settings { guard: Some(5), memory, ..Settings::new(8, 3) };
        let mut tracker = learn::<f64>(settings, &rows);
        tracker.admit(3, &loadings).unwrap();
        // About its mean the channel is what the loadings say; the mean itself stays.
        let mean = tracker.mean().to_vec();
        let told: Vec<Vec<f64>> = rows
            .iter()
            .map(|row| {
                let deviations = row.iter().zip(&mean).zip(&loadings).enumerate();
                let moved = deviations.filter(|(channel, _)| *channel != 3);
                let mut row = row.clone();
                row[3] = moved.map(|(_, ((x, mean), loading))| (x - mean) * loading).sum();
                row
            })
            .collect();
        assert_equals(&mut tracker, &Batch::of(&told, &forgotten(200, memory), true), rounding(200, 8));
    }
}

#[test]
fn loadings_that_are_no_numbers_are_refused_and_change_nothing() {
    let rows = plant(109, 50, 8, 3, 0.1);
    let mut tracker = learn::<f64>(Settings::new(8, 3), &rows);
    let before = tracker.factor_row(0).to_vec();
    assert!(matches!(tracker.admit(3, &[0.5; 7]), Err(Error::Length { expected: 8, got: 7, .. })));
    assert!(matches!(tracker.admit(8, &[0.5; 8]), Err(Error::Length { .. })));
    let mut loadings = [0.5; 8];
    loadings[2] = f64::INFINITY;
    assert!(matches!(tracker.admit(3, &loadings), Err(Error::NonFinite { index: 2, .. })));
    assert_eq!(tracker.factor_row(0), before);
}
