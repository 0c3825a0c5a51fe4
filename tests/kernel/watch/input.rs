//! Rows as they come: units, levels, constant, late, stuck and vanished channels.

use perpend::watch::{Settings, Watch};

use super::settled;
use crate::watch_stream::{CHANNELS, Normal, each, healthy};

#[test]
fn verdicts_do_not_depend_on_units_or_levels() {
    let rows = healthy(2_500, 22);
    let mut plain = Watch::<f64>::new(Settings::new(CHANNELS)).unwrap();
    let plain = plain.replay(&rows).unwrap();
    for decimal in [false, true] {
        let converted: Vec<f64> = rows
            .iter()
            .enumerate()
            .map(|(index, value)| {
                let channel = index % CHANNELS;
                let power = channel as f64 - 6.0;
                // Powers of two change nothing at all; powers of ten and new zeros round.
                if decimal { value * 10_f64.powf(power) + 1e3 * power } else { value * (4.0 * power).exp2() }
            })
            .collect();
        let mut watch = Watch::<f64>::new(Settings::new(CHANNELS)).unwrap();
        let replay = watch.replay(&converted).unwrap();
        assert_eq!(replay.alarm, plain.alarm);
        assert_eq!(replay.exceeds, plain.exceeds);
        if !decimal {
            assert_eq!(replay.numbers[0].iter().map(|x| x.to_bits()).collect::<Vec<_>>(), {
                plain.numbers[0].iter().map(|x| x.to_bits()).collect::<Vec<_>>()
            });
        }
    }
}

#[test]
fn a_movement_of_one_on_an_offset_of_a_thousand_million_is_judged() {
    let lifted: Vec<f64> = healthy(2_000, 23).iter().map(|value| value + 1e9).collect();
    let mut watch = Watch::<f64>::new(Settings::new(CHANNELS)).unwrap();
    watch.replay(&lifted).unwrap();
    let mut row = lifted[..CHANNELS].to_vec();
    row[6] += 8.0;
    let reading = watch.tick(&row).unwrap();
    assert!(reading.exceeds[0] && reading.shares[6] > 0.5);
}

#[test]
fn float32_models_give_the_same_verdicts() {
    let mut rows = healthy(2_000, 24);
    rows.chunks_exact_mut(CHANNELS).skip(1_500).for_each(|row| row[1] += 6.0);
    let wide = Watch::<f64>::new(Settings::new(CHANNELS)).unwrap().replay(&rows).unwrap();
    let narrow = Watch::<f32>::new(Settings::new(CHANNELS)).unwrap().replay(&rows).unwrap();
    let differing = wide.alarm.iter().zip(&narrow.alarm).filter(|(a, b)| a != b).count();
    assert!(differing <= 2, "{differing}");
}

#[test]
fn a_constant_channel_has_no_say_until_it_has_moved() {
    let mut rows = healthy(2_400, 25);
    for (tick, row) in rows.chunks_exact_mut(CHANNELS).enumerate() {
        if tick < 1_000 {
            row[3] = 53.724;
        }
        // Arrives late.
        if tick < 1_200 {
            row[8] = f64::NAN;
        }
    }
    let settings = Settings { settle: 300, ..Settings::new(CHANNELS) };
    let mut watch = Watch::<f64>::new(settings).unwrap();
    let mut alarmed = 0;
    for (tick, row) in each(&rows).enumerate() {
        let reading = watch.tick(row).unwrap();
        alarmed += usize::from(reading.alarm);
        if (300..1_000).contains(&tick) {
            assert!(reading.spe.is_finite() && reading.contributions[3] == 0.0 && reading.shares[3] == 0.0);
        }
    }
    assert!(watch.moves(3) && watch.moves(8));
    assert!(alarmed < 30, "{alarmed} alarmed rows while two channels joined");
    let mut row = rows[2_399 * CHANNELS..].to_vec();
    row[3] += 40.0;
    let reading = watch.tick(&row).unwrap();
    assert!(reading.exceeds_any() && reading.shares[3] > 0.5, "{:?}", reading.shares);
}

#[test]
fn stuck_and_vanished_channels_are_named_as_such() {
    let mut watch = settled(26);
    let rows = healthy(60, 27);
    for (tick, row) in each(&rows).enumerate() {
        let mut row = row.to_vec();
        row[2] = rows[2];
        row[9] = f64::NAN;
        let reading = watch.tick(&row).unwrap();
        assert_eq!(reading.conditions[2].stuck, tick >= 12, "{tick}");
        assert_eq!(reading.conditions[9].vanished, tick >= 10, "{tick}");
        assert!(reading.conditions[9].missing && !reading.conditions[0].stuck);
    }
}

#[test]
fn fewer_settling_rows_than_channels_will_do() {
    let mut watch = Watch::<f64>::new(Settings { settle: 30, ..Settings::new(40) }).unwrap();
    let mut normal = Normal::new(65);
    let mixing: Vec<f64> = (0..40).map(|_| normal.draw()).collect();
    for tick in 0..400 {
        let shared = 3.0 * normal.draw();
        let row: Vec<f64> = mixing.iter().map(|m| m * shared + 0.3 * normal.draw()).collect();
        let reading = watch.tick(&row).unwrap();
        assert!(tick < 30 || reading.spe.is_finite());
        assert!(!reading.alarm, "{tick}");
    }
}

#[test]
fn a_channel_that_joins_late_does_not_leave_the_limit_wide() {
    let mut rows = healthy(8_000, 50);
    let mut with_late = rows.clone();
    with_late.chunks_exact_mut(CHANNELS).take(1_500).for_each(|row| row[4] = f64::NAN);
    let limit = |rows: &[f64]| {
        let mut watch = Watch::<f64>::new(Settings::new(CHANNELS)).unwrap();
        watch.replay(rows).unwrap().numbers[1][7_999]
    };
    let (complete, late) = (limit(&rows), limit(&with_late));
    assert!((late / complete - 1.0).abs() < 0.25, "{late} against {complete}");
    rows.truncate(0);
}
