//! Rows in blocks against rows one by one, and against all rows at once.

use perpend::Error;
use perpend::tracker::{Settings, Tracker};
use proptest::prelude::*;

use super::{Batch, EPS, Noise, assert_equals, forgotten, largest_angle, learn, plant, rounding};

/// Channels and rank, with the default guard: the scatter of the channels is decomposed for the first two, the products
/// of the rows for the others.
const SHAPES: [(usize, usize); 4] = [(16, 3), (60, 6), (90, 2), (200, 8)];

/// Learns `rows` in pieces of as many rows as `pieces` says, again and again.
fn in_blocks(settings: Settings, rows: &[Vec<f64>], pieces: &[usize]) -> Tracker<f64> {
    let mut tracker = Tracker::new(settings).unwrap();
    let mut rest = rows;
    for &piece in pieces.iter().cycle() {
        let (now, later) = rest.split_at(piece.min(rest.len()));
        tracker.update_rows(&now.concat()).unwrap();
        rest = later;
        if rest.is_empty() {
            return tracker;
        }
    }
    tracker
}

fn settings(channels: usize, rank: usize, memory: Option<f64>) -> Settings {
    Settings { memory, ..Settings::new(channels, rank) }
}

/// Exact energies lie within the certificate, and the tracked and the lost ones add up to the exact trace.
fn assert_certified(tracker: &mut Tracker<f64>, batch: &Batch, slack: f64) {
    let certificate = tracker.certificate().unwrap();
    let room = slack * batch.energies[0];
    for (got, exact) in tracker.energies().iter().zip(&batch.energies) {
        assert!(*got <= exact + room, "{got} above {exact}");
        assert!(*exact <= got + certificate.lost + room, "{exact} above {got} + {}", certificate.lost);
    }
    let trace: f64 = batch.energies.iter().sum();
    assert!((tracker.total_energy() - trace).abs() <= slack * trace, "trace {trace}");
    if let Some(sine) = certificate.sine {
        let axes = batch.axes(tracker.rank());
        assert!(largest_angle(tracker, &axes).sin() <= sine + slack);
    }
}

#[test]
fn rows_in_blocks_equal_the_batch_where_nothing_is_truncated() {
    for (channels, rank) in SHAPES {
        for memory in [None, Some(150.0)] {
            let settings = settings(channels, rank, memory);
            // As many sources as directions are tracked, strong enough for squares to tell apart.
            let mut rows = plant(107, 700, channels, settings.directions().min(14), 0.0);
            let mut next = Noise(109);
            let more: Vec<f64> = (0..channels).map(|_| next.next()).collect();
            for row in rows.iter_mut().filter(|_| settings.directions() > 14) {
                let state = next.next();
                row.iter_mut().zip(&more).for_each(|(x, share)| *x += state * share);
            }
            let mut tracker = in_blocks(settings, &rows, &[700]);
            let batch = Batch::of(&rows, &forgotten(700, memory), true);
            assert_equals(&mut tracker, &batch, rounding(700, channels));
            let mut alone = learn::<f64>(settings, &rows);
            alone.refresh().unwrap();
            for (got, expected) in tracker.energies().iter().zip(alone.energies()) {
                assert!((got - expected).abs() <= rounding(700, channels) * alone.energies()[0]);
            }
            assert_eq!((tracker.samples(), tracker.clock()), (700, 700.0));
            assert!((tracker.total_weight() - alone.total_weight()).abs() <= 700.0 * EPS * 700.0);
        }
    }
}

#[test]
fn truncated_in_blocks_the_exact_answer_lies_within_the_certificate_and_the_trace_is_exact() {
    for (channels, rank) in SHAPES {
        for center in [true, false] {
            let mut rows = plant(113, 500, channels, 6, 1.0);
            rows.extend(plant(127, 300, channels, 6, 1.0));
            let settings = Settings { memory: Some(120.0), center, ..Settings::new(channels, rank) };
            let mut tracker = in_blocks(settings, &rows, &[800]);
            let batch = Batch::of(&rows, &forgotten(800, Some(120.0)), center);
            assert_certified(&mut tracker, &batch, rounding(800, channels));
            let given_up = tracker.certificate().unwrap().lost;
            let alone = learn::<f64>(settings, &rows).certificate().unwrap().lost;
            assert!(given_up > 0.0 && given_up < 1.1 * alone, "{given_up} against {alone}");
        }
    }
}

#[test]
fn basis_and_trace_hold_after_1e5_rows_in_blocks() {
    for (channels, rank) in [(20, 4), (64, 2)] {
        let rows = plant(131, 100_000, channels, 6, 1.0);
        let mut tracker = in_blocks(settings(channels, rank, Some(500.0)), &rows, &[1000]);
        let error = tracker.orthogonality_error().unwrap();
        assert!(error <= 1e-14, "orthogonality {error:e}");
        tracker.refresh().unwrap();
        let batch = Batch::of(&rows[80_000..], &forgotten(20_000, Some(500.0)), true);
        let trace: f64 = batch.energies.iter().sum();
        assert!((tracker.total_energy() - trace).abs() < 1e-11 * trace);
    }
}

#[test]
fn directions_that_come_crooked_out_of_squares_are_mended() {
    // The weakest direction kept has 1e-9 of the energy of the strongest: squares leave 1e-7 of one in the other.
    for (channels, rank) in [(90, 2), (200, 8)] {
        let rows = plant(157, 600, channels, 6, 2e-3);
        let mut tracker = in_blocks(settings(channels, rank, Some(100.0)), &rows[..100], &[100]);
        for piece in rows[100..].chunks(50) {
            tracker.update_rows(&piece.concat()).unwrap();
            let error = tracker.orthogonality_error().unwrap();
            assert!(error <= 1e-14, "orthogonality {error:e}");
        }
        let batch = Batch::of(&rows, &forgotten(600, Some(100.0)), true);
        assert_certified(&mut tracker, &batch, rounding(600, channels));
    }
}

#[test]
fn energies_far_apart_go_row_by_row_and_keep_their_digits() {
    // Strengths from 1 down to 1e-7, energies to 1e-14: squares would hold two digits of the last.
    for channels in [12, 60] {
        let mut next = Noise(137);
        let mixing: Vec<f64> = (0..3 * channels).map(|_| next.next()).collect();
        let rows: Vec<Vec<f64>> = (0..400)
            .map(|_| {
                let states = [next.next(), 1e-3 * next.next(), 1e-7 * next.next()];
                (0..channels)
                    .map(|channel| (0..3).map(|s| states[s] * mixing[s * channels + channel]).sum())
                    .collect()
            })
            .collect();
        let settings = Settings { guard: Some(0), ..Settings::new(channels, 3) };
        let mut tracker = in_blocks(settings, &rows, &[400]);
        let batch = Batch::of(&rows, &forgotten(400, None), true);
        tracker.refresh().unwrap();
        let (got, expected) = (tracker.energies()[2], batch.energies[2]);
        assert!((got / expected - 1.0).abs() < 1e-6, "{got:e} against {expected:e}");
        assert!(tracker.orthogonality_error().unwrap() <= 1e-14);
    }
}

#[test]
fn an_offset_of_1e9_in_blocks_leaves_a_unit_signal_its_digits() {
    for (channels, rank) in SHAPES {
        let plain = plant(139, 900, channels, 6, 0.5);
        let lifted: Vec<Vec<f64>> = plain.iter().map(|row| row.iter().map(|x| x + 1e9).collect()).collect();
        let mut low = in_blocks(settings(channels, rank, Some(200.0)), &plain, &[900]);
        let mut high = in_blocks(settings(channels, rank, Some(200.0)), &lifted, &[900]);
        low.refresh().unwrap();
        high.refresh().unwrap();
        for (got, expected) in high.energies().iter().zip(low.energies()) {
            // The rows themselves are rounded to 1.2e-7.
            let slack = 4.0 * 1e9 * EPS * (expected * channels as f64).sqrt();
            assert!((got - expected).abs() < slack, "{got} against {expected}");
        }
    }
}

#[test]
fn float32_rows_in_blocks_stay_orthonormal_to_their_type() {
    for (channels, rank) in SHAPES {
        let rows = plant(149, 2000, channels, 6, 1.0);
        let mut tracker = Tracker::<f32>::new(settings(channels, rank, Some(300.0))).unwrap();
        tracker.update_rows(&rows.concat()).unwrap();
        let directions = tracker.settings().directions() as f64;
        let error = tracker.orthogonality_error().unwrap();
        assert!(error <= 10.0 * f64::from(f32::EPSILON) * directions.sqrt(), "{error:e}");
        let mut exact = in_blocks(settings(channels, rank, Some(300.0)), &rows, &[2000]);
        tracker.refresh().unwrap();
        exact.refresh().unwrap();
        for (got, expected) in tracker.energies().iter().zip(exact.energies()) {
            assert!((got - expected).abs() < 1e-4 * exact.energies()[0]);
        }
    }
}

#[test]
fn a_row_that_overflows_is_named_and_the_rows_before_it_are_learned() {
    for (channels, rank) in SHAPES {
        let mut rows = plant(151, 300, channels, 6, 1.0);
        rows[290] = vec![1e200; channels];
        let mut tracker = Tracker::<f64>::new(settings(channels, rank, None)).unwrap();
        let error = tracker.update_rows(&rows.concat()).unwrap_err();
        assert!(matches!(error, Error::InRow { row: 290, .. }), "{error}");
        assert_eq!(tracker.samples(), 290);
        assert!(tracker.orthogonality_error().unwrap() <= 1e-14);
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 24, ..ProptestConfig::default() })]

    /// Rows cut into pieces of any size, some with gaps: the certificate holds where every cell is there, and counters,
    /// basis and trace where not.
    #[test]
    fn rows_cut_into_any_pieces_stay_certified(
        seed in 1_u64..1 << 40,
        shape in 0_usize..SHAPES.len(),
        pieces in prop::collection::vec(1_usize..300, 1..6),
        gaps in any::<bool>(),
        memory in prop::option::of(20.0..500.0_f64),
    ) {
        let (channels, rank) = SHAPES[shape];
        let mut rows = plant(seed, 600, channels, 5, 1.0);
        if gaps {
            for (index, row) in rows.iter_mut().enumerate().filter(|(index, _)| index % 97 == 50) {
                row[index % channels] = f64::NAN;
            }
        }
        let mut tracker = in_blocks(settings(channels, rank, memory), &rows, &pieces);
        prop_assert_eq!((tracker.samples(), tracker.clock()), (600, 600.0));
        prop_assert!(tracker.orthogonality_error().unwrap() <= 1e-14);
        if !gaps {
            let batch = Batch::of(&rows, &forgotten(600, memory), true);
            assert_certified(&mut tracker, &batch, rounding(600, channels));
        }
    }
}
