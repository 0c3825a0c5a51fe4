//! The monitoring loop: what it says, learns, holds back and forgives.

use faer::Mat;
use perpend::Error;
use perpend::watch::{Limits, Phase, Reading, Settings, Watch};

use crate::watch_stream::{CHANNELS, Normal, each, healthy};

fn settled(seed: u64) -> Watch<f64> {
    let mut watch = Watch::new(Settings::new(CHANNELS)).unwrap();
    watch.settle_on(&healthy(500, seed)).unwrap();
    watch
}

/// The readings compared to the last bit; those that do not exist are equal.
fn same(a: &Reading, b: &Reading) -> bool {
    let bits = |r: &Reading| {
        let numbers = [r.spe, r.spe_limit, r.t2, r.t2_limit, r.spe_smooth, r.t2_smooth, r.weight, r.widening];
        (numbers.map(f64::to_bits), r.phase, r.alarm, r.exceeds, r.drift.mean_shift.map(f64::to_bits))
    };
    bits(a) == bits(b)
}

#[test]
fn it_settles_on_the_first_rows_and_says_so() {
    let mut watch = Watch::<f64>::new(Settings { settle: 100, ..Settings::new(CHANNELS) }).unwrap();
    for (tick, row) in each(&healthy(130, 1)).enumerate() {
        let reading = watch.tick(row).unwrap();
        assert_eq!(reading.phase == Phase::Settling, tick < 100, "{tick}");
        assert_eq!(reading.spe.is_nan(), tick < 100);
        assert!(!reading.alarm);
    }
    assert!((3..=5).contains(&watch.rank()));
}

#[test]
fn spe_and_t2_agree_with_a_batch_decomposition_of_the_settling_rows() {
    let rows = healthy(400, 2);
    // Four axes and eight guard directions: all twelve are tracked, nothing is truncated.
    let settings = Settings { memory: None, rank: Some(4), ..Settings::new(CHANNELS) };
    let mut watch = Watch::<f64>::new(settings).unwrap();
    watch.settle_on(&rows).unwrap();
    assert_eq!(watch.dropped(), 0, "the comparison needs all rows");
    watch.freeze();
    let n = 400.0;
    let column = |c: usize| each(&rows).map(move |row| row[c]);
    let mean: Vec<f64> = (0..CHANNELS).map(|c| column(c).sum::<f64>() / n).collect();
    let spread: Vec<f64> =
        (0..CHANNELS).map(|c| (column(c).map(|x| (x - mean[c]).powi(2)).sum::<f64>() / n).sqrt()).collect();
    let scaled = |row: &[f64], c: usize| (row[c] - mean[c]) / spread[c];
    let matrix = Mat::from_fn(400, CHANNELS, |i, j| scaled(&rows[i * CHANNELS..][..CHANNELS], j) / n.sqrt());
    let svd = matrix.thin_svd().unwrap();
    for row in each(&healthy(50, 3)) {
        let reading = watch.tick(row).unwrap();
        let x: Vec<f64> = (0..CHANNELS).map(|c| scaled(row, c)).collect();
        let scores: Vec<f64> = (0..4).map(|k| (0..CHANNELS).map(|c| svd.V()[(c, k)] * x[c]).sum()).collect();
        let t2: f64 = (0..4).map(|k| (scores[k] / svd.S()[k]).powi(2)).sum();
        let spe = x.iter().map(|v| v * v).sum::<f64>() - scores.iter().map(|t| t * t).sum::<f64>();
        // The difference of the squares loses what the scores carry: 400 rows of sums, 1e3 eps of |x|^2 at most.
        let tolerance = 1e3 * f64::EPSILON * x.iter().map(|v| v * v).sum::<f64>();
        assert!((reading.spe - spe).abs() < tolerance, "{} {spe}", reading.spe);
        assert!((reading.t2 / t2 - 1.0).abs() < 1e-11, "{} {t2}", reading.t2);
    }
}

#[test]
fn contributions_sum_to_the_spe_with_gaps_too() {
    let mut watch = settled(4);
    let mut normal = Normal::new(5);
    for row in each(&healthy(300, 6)) {
        let mut row = row.to_vec();
        for value in &mut row {
            if normal.uniform() < 0.1 {
                *value = f64::NAN;
            }
        }
        let reading = watch.tick(&row).unwrap();
        let sum: f64 = reading.contributions.iter().sum();
        assert!((sum - reading.spe).abs() <= 4.0 * CHANNELS as f64 * f64::EPSILON * reading.spe);
        assert_eq!(reading.missing(), row.iter().filter(|value| value.is_nan()).count());
    }
}

#[test]
fn replay_gives_the_readings_of_tick_to_the_last_bit() {
    let mut rows = healthy(3_000, 7);
    for (tick, row) in rows.chunks_exact_mut(CHANNELS).enumerate() {
        if (1_000..1_800).contains(&tick) {
            row[4] += 9.0;
        }
        if tick % 37 == 0 {
            row[tick % CHANNELS] = f64::NAN;
        }
    }
    let settings = Settings { hold: 100, ..Settings::new(CHANNELS) };
    let mut one_by_one = Watch::<f64>::new(settings).unwrap();
    let mut at_once = one_by_one.clone();
    let replay = at_once.replay(&rows).unwrap();
    for (tick, row) in each(&rows).enumerate() {
        let reading = one_by_one.tick(row).unwrap();
        assert_eq!(reading.phase, replay.phase[tick]);
        assert_eq!(reading.spe.to_bits(), replay.numbers[0][tick].to_bits());
        assert_eq!(reading.t2_limit.to_bits(), replay.numbers[3][tick].to_bits());
        assert_eq!(reading.weight.to_bits(), replay.numbers[9][tick].to_bits());
        assert_eq!(reading.exceeds, replay.exceeds[4 * tick..][..4]);
    }
    assert!(replay.phase.contains(&Phase::Adopting));
}

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
fn the_channel_that_is_wrong_is_the_first_suspect() {
    for channel in 0..CHANNELS {
        let mut watch = settled(28);
        let mut row = healthy(1, 29 + channel as u64);
        row[channel] += 6.0;
        let reading = watch.tick(&row).unwrap();
        assert!(reading.exceeds_any(), "{channel}");
        let first = perpend::watch::suspects::foremost(&reading.shares, 1);
        assert_eq!(first[0].0, channel);
        assert!(reading.shares.iter().all(|share| (0.0..=1.0).contains(share)));
    }
}

#[test]
fn every_source_of_limits_alarms_on_a_fault_and_not_without() {
    for limits in [Limits::Moments, Limits::Empirical, Limits::Spectrum] {
        let mut rows = healthy(3_000, 60);
        rows.chunks_exact_mut(CHANNELS).skip(2_900).for_each(|row| row[0] += 5.0);
        let mut watch = Watch::<f64>::new(Settings { limits, ..Settings::new(CHANNELS) }).unwrap();
        let replay = watch.replay(&rows).unwrap();
        let before = replay.alarm[..2_900].iter().filter(|on| **on).count();
        assert!(before < 5, "{limits:?}: {before}");
        let on = replay.alarm[2_903..].iter().filter(|on| **on).count();
        assert!(on > 93, "{limits:?}: {on} of 97");
    }
}

#[test]
fn what_cannot_be_settled_on_is_refused_or_waited_out() {
    let mut watch = settled(61);
    let probe = healthy(1, 62);
    let mut twin = watch.clone();
    let flat = vec![7.0; 100 * CHANNELS];
    assert!(matches!(watch.settle_on(&flat), Err(Error::Parameter { .. })));
    assert!(matches!(watch.settle_on(&healthy(10, 63)), Err(Error::Parameter { .. })));
    assert!(same(watch.tick(&probe).unwrap(), twin.tick(&probe).unwrap()));
    let mut waiting = Watch::<f64>::new(Settings { settle: 100, ..Settings::new(CHANNELS) }).unwrap();
    waiting.replay(&flat).unwrap();
    assert_eq!(waiting.phase(), Phase::Settling);
    waiting.replay(&healthy(200, 64)).unwrap();
    assert_ne!(waiting.phase(), Phase::Settling);
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
fn bad_rows_and_settings_are_refused_and_change_nothing() {
    let rows = healthy(3, 66);
    let mut watch = settled(67);
    let mut twin = watch.clone();
    let mut bad = rows[..CHANNELS].to_vec();
    bad[5] = f64::NEG_INFINITY;
    let refused = watch.tick(&bad).unwrap_err();
    assert_eq!(refused, Error::NonFinite { what: "row", index: 5, value: f64::NEG_INFINITY });
    assert!(matches!(watch.tick(&rows[..3]), Err(Error::Length { expected: CHANNELS, got: 3, .. })));
    let mut block = rows.clone();
    block[2 * CHANNELS] = f64::INFINITY;
    assert!(matches!(watch.replay(&block), Err(Error::InRow { row: 2, .. })));
    for row in each(&rows) {
        assert!(same(watch.tick(row).unwrap(), twin.tick(row).unwrap()));
    }
    let defaults = || Settings::new(CHANNELS);
    for (settings, name) in [
        (Settings { rank: Some(CHANNELS), ..defaults() }, "rank"),
        (Settings { rank: Some(0), ..defaults() }, "rank"),
        (Settings { channels: 1, ..defaults() }, "channels"),
        (Settings { settle: 3, ..defaults() }, "settle"),
        (Settings { memory: Some(f64::NAN), ..defaults() }, "memory"),
        (Settings { false_alarm: 0.0, ..defaults() }, "false_alarm"),
        (Settings { confirm: 6, ..defaults() }, "confirm"),
        (Settings { hold: 0, ..defaults() }, "hold"),
    ] {
        let refused = Watch::<f64>::new(settings).err();
        assert!(matches!(refused, Some(Error::Parameter { name: got, .. }) if got == name), "{refused:?}");
    }
}
