//! A watch as bytes: one that is read back goes on as if nothing had happened, and nothing else is taken for one.

use perpend::watch::{Limits, Phase, Reading, Settings, Watch};
use perpend::{Scalar, State};
use proptest::prelude::*;

use crate::state_refusals::{Forgery, refusal, same_or_refused};
use crate::watch_stream::{CHANNELS, Normal, each, healthy};

/// Rows with all that can happen to a watch: a channel that joins late and one that stirs at the end, gaps, glitches, a
/// channel that sticks, a new regime that is adopted.
fn eventful(seed: u64) -> Vec<f64> {
    let mut normal = Normal::new(seed);
    let mut rows = healthy(1_400, seed);
    for (tick, row) in rows.chunks_exact_mut(CHANNELS).enumerate() {
        if tick < 300 {
            row[4] = f64::NAN;
        }
        if tick < 1_350 {
            row[9] = 2.25;
        }
        if (150..200).contains(&tick) {
            row[6] = 0.75;
        }
        if tick > 700 {
            row[0] += 12.0;
            row[7] -= 8.0;
        }
        if normal.uniform() < 0.02 {
            row[tick % CHANNELS] += 40.0;
        }
        if normal.uniform() < 0.05 {
            row[(tick * 7) % CHANNELS] = f64::NAN;
        }
    }
    rows
}

/// All of a reading, to the last bit.
fn bits(reading: &Reading) -> (Vec<u64>, String) {
    let numbers = [
        reading.spe,
        reading.spe_limit,
        reading.t2,
        reading.t2_limit,
        reading.spe_smooth,
        reading.spe_smooth_limit,
        reading.t2_smooth,
        reading.t2_smooth_limit,
        reading.widening,
        reading.weight,
    ];
    let drift = [reading.drift.angle, reading.drift.captured, reading.drift.mean_shift];
    let all = numbers.into_iter().chain(drift.map(|figure| figure.unwrap_or(-1.0)));
    let all = all.chain(reading.contributions.iter().chain(&reading.shares).copied());
    let said =
        (reading.tick, reading.phase, reading.alarm, reading.exceeds, reading.rank, &reading.conditions);
    (all.map(f64::to_bits).collect(), format!("{said:?}"))
}

fn watch<T: Scalar>(limits: Limits) -> Watch<T> {
    let settings = Settings { settle: 60, hold: 30, memory: Some(400.0), limits, ..Settings::new(CHANNELS) };
    Watch::new(settings).unwrap()
}

/// Ticks through eventful rows; at every `step`th tick it is written, read back, and gone on with beside.
fn goes_on<T: Scalar>(limits: Limits, seed: u64, step: usize) {
    let rows = eventful(seed);
    let mut plain = watch::<T>(limits);
    let mut restored = plain.clone();
    let mut phases = Vec::new();
    for (tick, row) in each(&rows).enumerate() {
        if tick % step == 0 {
            let bytes = restored.to_bytes().unwrap();
            restored = Watch::from_bytes(&bytes).unwrap();
            assert_eq!(restored.to_bytes().unwrap(), bytes);
            assert_eq!(restored.phase(), plain.phase());
        }
        let expected = bits(plain.tick(row).unwrap());
        assert_eq!(bits(restored.tick(row).unwrap()), expected, "{limits:?}, tick {tick}");
        phases.push(plain.phase());
    }
    assert!(restored.events().eq(plain.events()) && plain.events().count() > 0);
    assert_eq!(restored.names(), plain.names());
    for phase in Phase::ALL {
        assert!(phases.contains(&phase), "{phase:?} was not met");
    }
}

#[test]
fn restored_and_continued_equals_uninterrupted_to_the_last_bit() {
    for limits in Limits::ALL {
        goes_on::<f64>(limits, 71, 1);
        goes_on::<f32>(limits, 72, 7);
    }
}

/// A small watch in the middle of everything.
fn busy() -> Watch<f64> {
    let settings =
        Settings { settle: 40, hold: 10, rank: Some(1), memory: Some(60.0), of: 4, ..Settings::new(3) };
    let mut watch = Watch::with_names(settings, ["näh", "", "fern"].map(String::from).to_vec()).unwrap();
    let mut normal = Normal::new(73);
    for tick in 0..130 {
        let shared = normal.draw();
        let level = if tick > 80 { 50.0 } else { 0.0 };
        let mut row = [2.0 * shared + 0.2 * normal.draw(), shared + level + 0.2 * normal.draw(), 4.5];
        if tick > 120 {
            row[2] += shared;
        }
        if tick % 9 == 3 {
            row[0] = f64::NAN;
        }
        watch.tick(&row).unwrap();
    }
    assert!(watch.events().count() > 0, "{:?}", watch.reading());
    watch
}

#[test]
fn every_truncation_and_changed_byte_of_a_watch_is_refused_or_means_the_same() {
    let state = busy().to_bytes().unwrap();
    (0..state.len()).step_by(7).for_each(|length| drop(refusal::<Watch<f64>>(&state[..length])));
    let mut bytes = state.clone();
    for place in 0..state.len() {
        for value in [state[place] ^ 1, state[place] ^ 128, b'9', 0] {
            bytes[place] = value;
            same_or_refused::<Watch<f64>>(&bytes, &state);
        }
        bytes[place] = state[place];
    }
}

#[test]
fn forgeries_of_a_watch_are_refused_by_what_is_wrong_with_them() {
    let state = busy().to_bytes().unwrap();
    let forged = || Forgery::of(&state).word("checksum", "crc32:");
    let cases: Vec<(Forgery, &str)> = vec![
        (forged().word("watch.channels", "1000000000"), "watch.runs.last: expected shape [1, 1000000000]"),
        (forged().word("watch.channels", "1"), "channels: expected 2 or more"),
        (forged().word("watch.settle", "3"), "settle: expected 20 rows or more"),
        (forged().word("watch.of", "1000000000000"), "watch.alarm.window: expected shape [1000000000000]"),
        (forged().word("watch.false_alarm", "NaN"), "false_alarm: expected 1e-9 to 0.2"),
        (forged().word("watch.limits", "Guessed"), "watch.limits: expected one of"),
        (forged().word("watch.phase", "Sleeping"), "watch.phase: expected one of"),
        (forged().word("watch.settled", "false"), "watch.settling: expected an array of that name"),
        (
            forged().word("watch.axes", "2"),
            "watch.axes: expected fewer than channels, and no more than asked",
        ),
        (forged().word("watch.memory", "61.0"), "watch.model.tracker: expected the settings of the watch"),
        (forged().word("watch.alarm.next", "4"), "watch.alarm.next: expected at most 3"),
        (forged().word("watch.spe.limit", "NaN"), "watch.spe.limit: expected a number"),
        (forged().word("watch.spe.smooth.spread", "0.0"), "watch.spe.smooth.spread: expected a positive"),
        (
            forged().word("watch.model.floor", "-1.0"),
            "watch.model.floor: expected a finite number, 0 or more",
        ),
        (forged().number("watch.model.units.spread", 0, 0.0), "watch.model.units.spread: expected positive"),
        (forged().number("watch.model.units.moves", 0, 0.0), "watch.model.units: expected more channels"),
        (
            forged().number("watch.model.lens.axes", 0, 0.1),
            "watch.model.lens.axes: expected orthonormal rows",
        ),
        (forged().number("watch.model.lens.energies", 0, 0.0), "watch.model.lens.axes: expected axes with"),
        (
            forged().number("watch.model.tracker.directions", 0, 9.0),
            "watch.model.tracker.directions: expected",
        ),
        (
            forged().number("watch.runs.last", 0, f64::INFINITY),
            "watch.runs.last: expected finite numbers, or",
        ),
        (
            forged().number("watch.alarms.events", 8, 3.0),
            "watch.alarms.events: expected a peak, and suspects",
        ),
        (
            forged().number("watch.spe.now.statistic.moments", 3, -1.0),
            "watch.spe.now.statistic.moments: expected",
        ),
        (forged().number("watch.names.lengths", 0, 0.5), "watch.names: expected texts as long as"),
        (forged().array("watch.names", |_, _, data| data[0] = 0xff), "watch.names: expected text"),
        (forged().without("watch.ticks"), "watch.ticks: expected a word of that name, got none"),
        (forged().word("watch.tocks", "3"), "watch.tocks: expected nothing of that name in a Watch"),
    ];
    for (forgery, expected) in cases {
        let refused = refusal::<Watch<f64>>(&forgery.bytes());
        assert!(refused.starts_with(expected), "expected \"{expected}\", got \"{refused}\"");
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, failure_persistence: None, ..ProptestConfig::default() })]

    /// The checksum fits, so what is behind it has to hold: whatever is read can be used.
    #[test]
    fn a_forged_number_is_refused_or_leaves_a_watch_that_can_be_used(
        array in any::<prop::sample::Index>(),
        place in any::<prop::sample::Index>(),
        value in prop_oneof![
            Just(0.0), Just(-1.0), Just(1e300), Just(-1e-300), Just(1e9), any::<f64>()
        ],
    ) {
        let state = busy().to_bytes().unwrap();
        let forgery = Forgery::of(&state).word("checksum", "crc32:").any_number(array, place, value);
        if let Ok(mut watch) = Watch::<f64>::from_bytes(&forgery.bytes()) {
            let mut normal = Normal::new(74);
            for _ in 0..60 {
                let shared = normal.draw();
                let row = [2.0 * shared, shared + 50.0 + 0.1 * normal.draw(), 4.5 + shared];
                let _ = watch.tick(&row);
            }
        }
    }
}
