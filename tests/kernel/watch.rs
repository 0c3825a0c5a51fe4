//! The monitoring loop: what it says of rows. What it learns and forgives is in `gate`, rows as they come in `input`.

mod gate;
mod input;
mod state;

use faer::Mat;
use perpend::Error;
use perpend::watch::{Limits, Phase, Reading, Settings, Watch};

use crate::watch_stream::{CHANNELS, Normal, each, healthy};

/// A watch settled on 500 healthy rows.
fn settled(seed: u64) -> Watch<f64> {
    let mut watch = Watch::new(Settings::new(CHANNELS)).unwrap();
    watch.settle_on(&healthy(500, seed)).unwrap();
    watch
}

/// Standard deviation of each channel.
fn spreads(rows: &[f64]) -> Vec<f64> {
    let n = (rows.len() / CHANNELS) as f64;
    let column = |c: usize| each(rows).map(move |row| row[c]);
    let spread = |c: usize| {
        let mean = column(c).sum::<f64>() / n;
        (column(c).map(|x| (x - mean).powi(2)).sum::<f64>() / n).sqrt()
    };
    (0..CHANNELS).map(spread).collect()
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
    let spread = spreads(&rows);
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
fn the_spe_is_the_scaled_squared_difference_of_row_and_expected() {
    let settling = healthy(400, 21);
    let mut watch = Watch::<f64>::new(Settings::new(CHANNELS)).unwrap();
    assert!(
        watch.reading().expected.iter().all(|value| value.is_nan()),
        "nothing is expected before settling"
    );
    watch.settle_on(&settling).unwrap();
    assert_eq!(watch.dropped(), 0, "the spreads below are those of all rows");
    let spread = spreads(&settling);
    for row in each(&healthy(300, 22)) {
        let reading = watch.tick(row).unwrap();
        let off = |c: usize| (row[c] - reading.expected[c]) / spread[c];
        let spe: f64 = (0..CHANNELS).map(|c| off(c).powi(2)).sum();
        // Leaving the unit and coming back rounds each channel by some eps of its value in spreads, below 200 here.
        let tolerance = 4.0 * f64::EPSILON * 200.0 * CHANNELS as f64 * (1.0 + spe.sqrt());
        assert!((spe - reading.spe).abs() < tolerance, "{spe} {}", reading.spe);
    }
}

#[test]
fn in_a_gap_the_value_is_expected_that_leaves_no_residual_there() {
    let mut watch = settled(23);
    watch.freeze();
    let spread = spreads(&healthy(500, 23))[5];
    for row in each(&healthy(40, 24)) {
        let mut row = row.to_vec();
        row[5] = f64::NAN;
        let reading = watch.tick(&row).unwrap();
        let guess = reading.expected[5];
        assert_eq!(guess.to_bits(), reading.corrected[5].to_bits());
        row[5] = guess;
        let reading = watch.tick(&row).unwrap();
        // In a gap the noise takes a little off the scores, as it does not where the row is whole.
        let left = (reading.expected[5] - guess).abs() / spread;
        assert!(left < 0.05, "{left}");
    }
    let silent = watch.tick(&[f64::NAN; CHANNELS]).unwrap();
    let mut said = silent.expected.iter().chain(&silent.corrected);
    assert!(said.all(|value| value.is_nan()), "nothing is said of a row that is not judged");
}

#[test]
fn a_channel_corrected_alone_takes_its_share_from_the_statistic() {
    let mut watch = settled(27);
    watch.freeze();
    let total = |reading: &Reading| reading.spe / reading.spe_limit + reading.t2 / reading.t2_limit;
    for (index, row) in each(&healthy(60, 28)).enumerate() {
        let channel = index % CHANNELS;
        let mut row = row.to_vec();
        row[channel] += 9.0;
        let reading = watch.tick(&row).unwrap().clone();
        assert!(reading.exceeds[0] || reading.exceeds[1], "{index}");
        row[channel] = reading.corrected[channel];
        let left = total(watch.tick(&row).unwrap());
        let expected = total(&reading) * (1.0 - reading.shares[channel]);
        // Rows of up to 200 spreads off zero are rounded on the way to their own unit and back.
        let tolerance = 4.0 * f64::EPSILON * 200.0 * CHANNELS as f64 * (1.0 + total(&reading));
        assert!((left - expected).abs() < tolerance, "{index}: {left} {expected}");
    }
}

#[test]
fn energies_descend_and_are_the_variances_of_the_scores() {
    let mut watch = Watch::<f64>::new(Settings { rank: Some(4), ..Settings::new(CHANNELS) }).unwrap();
    assert!(watch.energies().is_empty(), "none while settling");
    watch.settle_on(&healthy(2_000, 25)).unwrap();
    let energies = watch.energies().to_vec();
    assert!(energies.len() == 4 && energies.windows(2).all(|pair| pair[0] >= pair[1]), "{energies:?}");
    // T2 divides by them: over the rows they were found from it averages to the rank.
    watch.freeze();
    let t2: f64 = each(&healthy(2_000, 25)).map(|row| watch.tick(row).unwrap().t2).sum();
    assert!((t2 / 2_000.0 - 4.0).abs() < 0.05, "{}", t2 / 2_000.0);
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

#[test]
fn limits_from_energies_count_those_that_are_not_tracked() {
    // Rank 3 and 8 guard directions of 60: most of the noise is in none of them.
    let channels = 60;
    let settings = Settings { limits: Limits::Spectrum, rank: Some(3), ..Settings::new(channels) };
    let mut watch = Watch::<f64>::new(settings).unwrap();
    let mut normal = Normal::new(68);
    let mixing: Vec<f64> = (0..3 * channels).map(|_| normal.draw()).collect();
    let mut beyond = 0;
    for tick in 0..4_000 {
        let movement = [normal.draw(), normal.draw(), normal.draw()];
        let row: Vec<f64> = (0..channels)
            .map(|channel| {
                let shared: f64 = (0..3).map(|k| movement[k] * mixing[3 * channel + k]).sum();
                shared + 0.5 * normal.draw()
            })
            .collect();
        let reading = watch.tick(&row).unwrap();
        beyond += usize::from(tick >= 500 && reading.exceeds[0]);
    }
    // One in four thousand is asked for.
    assert!(beyond < 8, "{beyond} of 3500");
}
