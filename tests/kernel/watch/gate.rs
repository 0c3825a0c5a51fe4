//! What the watch learns, holds back, adopts and forgives.

use perpend::watch::{Limits, Phase, Settings, Watch};

use super::settled;
use crate::watch_stream::{CHANNELS, Normal, each, healthy};

#[test]
fn a_row_beyond_a_limit_is_not_learned_and_nothing_is_forgotten() {
    let rows = healthy(2, 8);
    let mut watch = settled(9);
    let mut untouched = watch.clone();
    let mut glitch = rows[..CHANNELS].to_vec();
    glitch[3] += 1e5;
    let reading = watch.tick(&glitch).unwrap();
    assert!(reading.exceeds[0] && reading.weight == 0.0 && reading.phase == Phase::Exceeding);
    // The model has not moved: the next row gets the same statistics.
    let after = watch.tick(&rows[CHANNELS..]).unwrap().clone();
    let plain = untouched.tick(&rows[CHANNELS..]).unwrap();
    assert_eq!((after.spe.to_bits(), after.t2.to_bits()), (plain.spe.to_bits(), plain.t2.to_bits()));
}

#[test]
fn no_fault_is_absorbed_before_hold_and_none_locks_it_up() {
    for (name, size) in [("step", 6.0), ("huge step", 1e6)] {
        let mut watch = settled(10);
        let mut first_adopted = None;
        let mut phases = Vec::new();
        for (tick, row) in each(&healthy(6_000, 11)).enumerate() {
            let mut row = row.to_vec();
            row[2] += size;
            row[7] -= 0.7 * size;
            let reading = watch.tick(&row).unwrap();
            if reading.phase == Phase::Adopting {
                first_adopted.get_or_insert(tick);
                assert!(reading.weight > 0.0 && reading.weight <= 1.0);
            }
            if tick < 300 {
                assert!(reading.weight == 0.0 || !reading.exceeds_any(), "{name}: absorbed at {tick}");
            }
            phases.push(reading.phase);
        }
        let adopted = first_adopted.unwrap();
        assert!((300..330).contains(&adopted), "{name}: adopted from {adopted}");
        let healthy_at_the_end = phases[5_000..].iter().filter(|p| **p == Phase::Healthy).count();
        assert!(healthy_at_the_end > 980, "{name}: {healthy_at_the_end} of 1000 healthy");
    }
}

#[test]
fn a_burst_leaves_no_trace() {
    let mut watch = settled(12);
    let mut normal = Normal::new(13);
    let mut beyond = 0;
    for (tick, row) in each(&healthy(1_500, 14)).enumerate() {
        let mut row = row.to_vec();
        if (200..300).contains(&tick) {
            for value in &mut row {
                *value += 1e4 * normal.draw();
            }
        }
        let reading = watch.tick(&row).unwrap();
        beyond += usize::from(tick >= 340 && reading.exceeds_any());
    }
    assert!(beyond < 10, "{beyond} of 1160 rows beyond after the burst");
    let event = *watch.events().next().unwrap();
    assert_eq!((event.start, watch.events().count()), (202, 1));
    assert!(event.end.is_some_and(|end| (302..345).contains(&end)), "{event:?}");
    assert!((200..300).contains(&event.peak) && event.peak_ratio > 1e6);
}

#[test]
fn frozen_it_judges_and_learns_nothing_until_resumed() {
    let probe = healthy(1, 15);
    let mut watch = settled(16);
    watch.freeze();
    let before = watch.tick(&probe).unwrap().clone();
    for row in each(&healthy(800, 17)) {
        assert!(watch.tick(row).unwrap().weight == 0.0);
    }
    let after = watch.tick(&probe).unwrap();
    assert_eq!(before.spe.to_bits(), after.spe.to_bits());
    assert_eq!(before.spe_limit.to_bits(), after.spe_limit.to_bits());
    watch.resume();
    assert!(watch.tick(&probe).unwrap().weight > 0.0);
    for row in each(&healthy(200, 18)) {
        watch.tick(row).unwrap();
    }
    assert_ne!(before.spe.to_bits(), watch.tick(&probe).unwrap().spe.to_bits());
}

#[test]
fn accepting_in_an_alarm_adopts_at_once_and_moves_the_baseline() {
    let mut watch = settled(19);
    let mut beyond_again = 0;
    for (tick, row) in each(&healthy(1_500, 20)).enumerate() {
        let mut row = row.to_vec();
        row[5] += 8.0;
        if tick == 40 {
            assert_eq!(watch.phase(), Phase::Alarmed);
            watch.accept();
            assert!(!watch.events().any(|event| event.end.is_none()));
        }
        let reading = watch.tick(&row).unwrap();
        if (41..45).contains(&tick) {
            assert!(reading.weight > 0.0, "row {tick}");
        }
        beyond_again += usize::from(tick > 700 && reading.exceeds_any());
    }
    assert!(beyond_again < 20, "{beyond_again}");
    assert!(watch.reading().drift.mean_shift.is_some_and(|shift| shift > 0.5));
    watch.accept();
    let row = healthy(1, 21);
    assert!(watch.tick(&row).unwrap().drift.mean_shift.is_some_and(|shift| shift < 0.2));
}

#[test]
fn limits_find_back_after_a_regime_was_adopted() {
    for limits in [Limits::Moments, Limits::Empirical] {
        let mut watch = Watch::<f64>::new(Settings { limits, ..Settings::new(CHANNELS) }).unwrap();
        let mut rows = healthy(6_000, 53);
        for row in rows.chunks_exact_mut(CHANNELS).skip(2_000) {
            row[0] += 15.0;
            row[5] -= 9.0;
        }
        let replay = watch.replay(&rows).unwrap();
        assert!(replay.phase.contains(&Phase::Adopting));
        for (name, column) in [("SPE", 1), ("T2", 3)] {
            let (before, after) = (replay.numbers[column][1_999], replay.numbers[column][5_999]);
            assert!((0.7..1.4).contains(&(after / before)), "{limits:?} {name}: {before} became {after}");
        }
    }
}

/// Healthy rows, of which from row 2000 on one in `every` has a fault far beyond the limits.
fn now_and_then(every: usize) -> Vec<f64> {
    let mut rows = healthy(12_000, 40);
    for row in rows.chunks_exact_mut(CHANNELS).skip(2_000).step_by(every) {
        row[6] += 9.0;
    }
    rows
}

#[test]
fn a_fault_that_comes_and_goes_does_not_make_itself_healthy() {
    for limits in [Limits::Moments, Limits::Empirical, Limits::Spectrum] {
        for every in [7, 31] {
            let mut watch = Watch::<f64>::new(Settings { limits, ..Settings::new(CHANNELS) }).unwrap();
            let replay = watch.replay(&now_and_then(every)).unwrap();
            let last = (2_000..12_000).step_by(every).filter(|tick| *tick > 9_000);
            let (mut faults, mut beyond) = (0, 0);
            for tick in last {
                faults += 1;
                beyond += usize::from(replay.exceeds[4 * tick]);
            }
            assert!(beyond > faults * 9 / 10, "{limits:?} every {every}: {beyond} of {faults}");
            let (before, after) = (replay.numbers[1][1_999], replay.numbers[1][11_999]);
            assert!(after < 2.0 * before, "{limits:?} every {every}: limit {before} became {after}");
        }
    }
}

#[test]
fn what_was_accepted_raises_no_alarm_while_it_is_taken_up() {
    let mut watch = settled(41);
    let mut rows = healthy(2_000, 42);
    rows.chunks_exact_mut(CHANNELS).for_each(|row| {
        row[3] += 7.0;
        row[8] -= 5.0;
    });
    let mut alarmed = 0;
    for (tick, row) in each(&rows).enumerate() {
        if tick == 40 {
            assert!(watch.reading().alarm);
            watch.accept();
            assert_eq!(watch.phase(), Phase::Healthy);
        }
        alarmed += usize::from(watch.tick(row).unwrap().alarm && tick >= 40);
    }
    assert!(alarmed < 5, "{alarmed}");
    // And a fault that comes later is not forgiven.
    for row in each(&healthy(10, 43)) {
        let mut row = row.to_vec();
        row[1] += 9.0;
        watch.tick(&row).unwrap();
    }
    assert!(watch.reading().alarm);
}

#[test]
fn a_feed_that_stands_still_teaches_nothing() {
    let mut watch = settled(44);
    let rows = healthy(1, 45);
    for tick in 0..3_000 {
        let reading = watch.tick(&rows).unwrap();
        assert!(tick < 12 || reading.weight == 0.0, "{tick}");
    }
    // The smoothed statistics of one row repeated may stand beyond their limits, and come back within some tens of rows.
    let replay = watch.replay(&healthy(2_000, 46)).unwrap();
    let alarmed = replay.alarm[50..].iter().filter(|on| **on).count();
    assert!(alarmed < 5, "{alarmed}");
}

#[test]
fn a_frozen_watch_does_not_settle() {
    let mut watch = Watch::<f64>::new(Settings { settle: 50, ..Settings::new(CHANNELS) }).unwrap();
    watch.freeze();
    watch.replay(&healthy(200, 47)).unwrap();
    assert_eq!(watch.phase(), Phase::Settling);
    watch.resume();
    watch.replay(&healthy(51, 48)).unwrap();
    assert_eq!(watch.phase(), Phase::Healthy);
}
