//! No sequence of finite rows, gaps and scales makes the watch raise, lock up, go non-finite or lose orthonormality.

use perpend::watch::{Limits, Phase, Settings, Watch};
use proptest::prelude::*;

use crate::watch_stream::{CHANNELS, Normal, each, healthy};

/// What happens to a stretch of rows.
#[derive(Clone, Copy, Debug)]
enum Trouble {
    None,
    Offset(usize, f64),
    Scaled(f64),
    Gaps(f64),
    Stuck(usize),
    AllStuck,
    Noise(f64),
    Vanished(usize),
    AllGone,
    Extreme(f64),
}

fn trouble() -> impl Strategy<Value = Trouble> {
    let channel = 0..CHANNELS;
    let size = (-300.0..300.0_f64).prop_map(|power| 10_f64.powf(power));
    prop_oneof![
        Just(Trouble::None),
        (channel.clone(), size.clone()).prop_map(|(channel, size)| Trouble::Offset(channel, size)),
        size.clone().prop_map(Trouble::Scaled),
        (0.0..1.0_f64).prop_map(Trouble::Gaps),
        channel.clone().prop_map(Trouble::Stuck),
        Just(Trouble::AllStuck),
        size.prop_map(Trouble::Noise),
        channel.prop_map(Trouble::Vanished),
        Just(Trouble::AllGone),
        prop_oneof![Just(f64::MAX), Just(f64::MIN), Just(f64::MIN_POSITIVE), Just(5e-324), Just(-0.0)]
            .prop_map(Trouble::Extreme),
    ]
}

fn spoil(rows: &mut [f64], trouble: Trouble, normal: &mut Normal) {
    let first = rows[..CHANNELS].to_vec();
    for row in rows.chunks_exact_mut(CHANNELS) {
        match trouble {
            Trouble::None => {}
            Trouble::Offset(channel, size) => row[channel] += size,
            Trouble::Scaled(size) => row.iter_mut().for_each(|value| *value *= size),
            Trouble::Gaps(share) => {
                row.iter_mut().filter(|_| normal.uniform() < share).for_each(|value| *value = f64::NAN);
            }
            Trouble::Stuck(channel) => row[channel] = first[channel],
            Trouble::AllStuck => row.copy_from_slice(&first),
            Trouble::Noise(size) => row.iter_mut().for_each(|value| *value += size * normal.draw()),
            Trouble::Vanished(channel) => row[channel] = f64::NAN,
            Trouble::AllGone => row.fill(f64::NAN),
            Trouble::Extreme(value) => row.fill(value),
        }
        row.iter_mut()
            .filter(|value| value.is_infinite())
            .for_each(|value| *value = value.signum() * f64::MAX);
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 40, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn whatever_comes_it_stays_finite_orthonormal_and_open(
        stretches in prop::collection::vec((trouble(), 1..120_usize), 1..8),
        seed in 0..1000_u64,
        limits in prop_oneof![Just(Limits::Moments), Just(Limits::Empirical), Just(Limits::Spectrum)],
        memory in prop_oneof![Just(None), Just(Some(40.0)), Just(Some(1000.0))],
        rank in prop_oneof![Just(None), Just(Some(1)), Just(Some(CHANNELS - 1))],
    ) {
        let settings = Settings { settle: 60, hold: 40, limits, memory, rank, ..Settings::new(CHANNELS) };
        let mut watch = Watch::<f64>::new(settings).unwrap();
        let mut normal = Normal::new(seed + 1);
        let total: usize = stretches.iter().map(|(_, count)| count).sum();
        let mut rows = healthy(total, seed);
        let mut start = 0;
        for (trouble, count) in stretches {
            spoil(&mut rows[start * CHANNELS..][..count * CHANNELS], trouble, &mut normal);
            start += count;
        }
        for row in each(&rows) {
            let reading = watch.tick(row).unwrap();
            let judged = !reading.spe.is_nan();
            prop_assert!(!judged || (reading.spe.is_finite() && reading.t2.is_finite()), "{reading:?}");
            prop_assert!(!judged || (reading.spe_limit > 0.0 && reading.spe_limit.is_finite()), "{reading:?}");
            prop_assert!(!judged || (reading.spe_smooth.is_finite() && reading.t2_smooth.is_finite()), "{reading:?}");
            prop_assert!(reading.weight.is_finite() && (0.0..=1.0).contains(&reading.weight));
            prop_assert!(reading.shares.iter().all(|share| (0.0..=1.0).contains(share)), "{:?}", reading.shares);
        }
        let error = watch.orthogonality_error().unwrap();
        prop_assert!(error <= 10.0 * f64::EPSILON * (CHANNELS as f64).sqrt(), "{error}");
    }

    #[test]
    fn after_any_trouble_a_lasting_regime_is_taken_up(
        trouble in trouble(),
        count in 1..200_usize,
        level in -1e4..1e4_f64,
        seed in 0..1000_u64,
    ) {
        let settings = Settings { hold: 40, memory: Some(500.0), ..Settings::new(CHANNELS) };
        let mut watch = Watch::<f64>::new(settings).unwrap();
        watch.settle_on(&healthy(300, seed)).unwrap();
        let mut rows = healthy(count + 3_000, seed + 1);
        spoil(&mut rows[..count * CHANNELS], trouble, &mut Normal::new(seed + 2));
        // From there on another level in three channels.
        for row in rows.chunks_exact_mut(CHANNELS).skip(count) {
            row[0] += level;
            row[5] -= level;
            row[11] += 0.3 * level;
        }
        let replay = watch.replay(&rows).unwrap();
        let last = &replay.phase[count + 2_000..];
        let healthy = last.iter().filter(|phase| **phase == Phase::Healthy).count();
        prop_assert!(healthy > 900, "{healthy} of 1000 healthy after {trouble:?}");
    }
}

#[test]
fn a_fault_after_a_silence_that_outlasts_every_memory_names_its_channel() {
    let mut watch =
        Watch::<f64>::new(Settings { memory: Some(50.0), hold: 40, ..Settings::new(CHANNELS) }).unwrap();
    let rows = healthy(400, 5);
    watch.settle_on(&rows).unwrap();
    let still: Vec<f64> =
        (0..CHANNELS).map(|channel| each(&rows).map(|row| row[channel]).sum::<f64>() / 400.0).collect();
    for _ in 0..60_000 {
        let reading = watch.tick(&still).unwrap();
        assert!(reading.shares.iter().all(|share| (0.0..=1.0).contains(share)), "{reading:?}");
    }
    let mut faulty = still.clone();
    faulty[7] += 30.0;
    for _ in 0..10 {
        let reading = watch.tick(&faulty).unwrap().clone();
        assert!(reading.exceeds_any(), "{reading:?}");
        assert!(reading.shares.iter().all(|share| (0.0..=1.0).contains(share)), "{reading:?}");
        assert_eq!(perpend::watch::suspects::foremost(&reading.shares, 1)[0].0, 7, "{reading:?}");
    }
}

#[test]
#[ignore = "a minute long; run with `--release -- --ignored`"]
fn orthonormality_holds_after_1e7_ticks() {
    let mut watch = Watch::<f64>::new(Settings { memory: Some(500.0), ..Settings::new(CHANNELS) }).unwrap();
    let rows = healthy(5_000, 3);
    let mut worst = 0.0_f64;
    for _ in 0..2_000 {
        for row in each(&rows) {
            watch.tick(row).unwrap();
        }
        worst = worst.max(watch.orthogonality_error().unwrap());
    }
    assert_eq!(watch.ticks(), 10_000_000);
    println!("worst |I - Q Q^T| at 2000 looks: {worst:e}");
    assert!(worst <= 10.0 * f64::EPSILON * (CHANNELS as f64).sqrt(), "{worst:e}");
}
