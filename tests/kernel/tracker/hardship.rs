//! Long runs, silence, far offsets, glitches, small energies: what rounding must not eat.

use perpend::tracker::{Settings, Tracker};

use super::{Batch, EPS, Noise, forgotten, learn, learn_more, plant};

#[test]
fn orthonormality_and_trace_hold_after_1e5_updates() {
    let rows = plant(37, 100_000, 20, 6, 1.0);
    let mut tracker = learn::<f64>(Settings { memory: Some(500.0), ..Settings::new(20, 4) }, &rows);
    let error = tracker.orthogonality_error().unwrap();
    assert!(error <= 1e-14, "orthogonality {error:e}");
    tracker.refresh().unwrap();
    let batch = Batch::of(&rows[80_000..], &forgotten(20_000, Some(500.0)), true);
    let trace: f64 = batch.energies.iter().sum();
    assert!((tracker.total_energy() - trace).abs() < 1e-11 * trace);
}

#[test]
fn rows_almost_within_the_directions_cost_no_orthonormality() {
    // What the directions leave of a row is 1e-8 of it: uncleaned, it would hold 1e-8 of them.
    let rows = plant(39, 2000, 20, 4, 1e-8);
    let settings = Settings { memory: Some(50.0), guard: Some(2), ..Settings::new(20, 4) };
    let mut tracker = learn::<f64>(settings, &rows[..100]);
    for row in &rows[100..] {
        tracker.update(row, 1.0).unwrap();
        let error = tracker.orthogonality_error().unwrap();
        assert!(error <= 1e-14, "orthogonality {error:e}");
    }
}

#[test]
fn rows_so_small_that_what_they_leave_squares_to_nothing_cost_no_orthonormality() {
    for scale in (100..=152).map(|power| 10f64.powi(-power)) {
        for left in [1e-6, 1e-10, 1e-14] {
            let settings = Settings { center: false, ..Settings::new(6, 3) };
            let mut tracker = Tracker::<f64>::new(settings).unwrap();
            let mut noise = Noise(11);
            let base: Vec<f64> = (0..6).map(|_| noise.next()).collect();
            for _ in 0..4 {
                let row: Vec<f64> = base.iter().map(|value| scale * (value + left * noise.next())).collect();
                tracker.update(&row, 1.0).unwrap();
                let error = tracker.orthogonality_error().unwrap();
                assert!(error <= 1e-14, "scale {scale:e}, left {left:e}: orthogonality {error:e}");
            }
        }
    }
}

#[test]
fn weights_near_nothing_leave_every_energy_a_number() {
    for weight in [f64::from_bits(1), 1e-310, f64::MIN_POSITIVE, 1e-200] {
        let mut tracker = Tracker::<f64>::new(Settings::new(3, 2)).unwrap();
        for row in [[0.5, -2.0, 1.25], [3.0, 0.75, -1.5], [-0.25, 4.0, 2.0]] {
            tracker.update(&row, weight).unwrap();
        }
        tracker.refresh().unwrap();
        assert!(tracker.energies().iter().all(|energy| energy.is_finite()), "{weight:e}");
        assert!((0.0..=1.0).contains(&tracker.explained()) && tracker.noise_energy() >= 0.0, "{weight:e}");
    }
    // Its weighted square is a number; its variance is none.
    let mut tracker = Tracker::<f64>::new(Settings { center: false, ..Settings::new(2, 1) }).unwrap();
    assert!(tracker.update(&[1e160, 1.0], 1e-100).is_err());
    assert_eq!(tracker.samples(), 0);
}

#[test]
fn float32_rows_stay_orthonormal_to_their_type() {
    let rows = plant(41, 20_000, 20, 6, 1.0);
    let mut tracker = learn::<f32>(Settings { memory: Some(500.0), ..Settings::new(20, 4) }, &rows);
    assert!(tracker.orthogonality_error().unwrap() <= 10.0 * f64::from(f32::EPSILON) * 12f64.sqrt());
    let exact = learn::<f64>(Settings { memory: Some(500.0), ..Settings::new(20, 4) }, &rows);
    let mut exact = exact;
    tracker.refresh().unwrap();
    exact.refresh().unwrap();
    for (got, expected) in tracker.energies().iter().zip(exact.energies()) {
        assert!((got - expected).abs() < 1e-4 * exact.energies()[0]);
    }
}

#[test]
fn a_constant_input_is_harmless_for_1e6_ticks_and_back() {
    let rows = plant(67, 400, 10, 4, 0.1);
    let settings = Settings { memory: Some(100.0), ..Settings::new(10, 3) };
    for constant in [vec![0.0; 10], rows[7].clone(), vec![3e8; 10]] {
        let mut tracker = learn::<f64>(settings, &rows);
        for _ in 0..1_000_000 {
            tracker.update(&constant, 1.0).unwrap();
        }
        tracker.refresh().unwrap();
        assert!(tracker.energies().iter().all(|energy| *energy == 0.0 || energy.is_normal()));
        assert!(tracker.energies()[0] < 1e-20 * constant[0].abs().max(1.0).powi(2));
        // The step back from 3e8 is an energy of 1e15, forgotten by e^-80 after 8000 rows.
        for _ in 0..20 {
            learn_more(&mut tracker, &rows);
        }
        let all: Vec<Vec<f64>> = std::iter::repeat_n(&rows, 6).flatten().cloned().collect();
        let batch = Batch::of(&all, &forgotten(2400, Some(100.0)), true);
        tracker.refresh().unwrap();
        for (got, expected) in tracker.energies().iter().zip(&batch.energies) {
            assert!((got - expected).abs() <= 0.02 * expected, "{got} against {expected}");
        }
        assert!(tracker.orthogonality_error().unwrap() <= 1e-14);
    }
}

#[test]
fn an_offset_of_1e9_costs_no_digits_beyond_those_of_the_rows() {
    let plain = plant(71, 3000, 8, 3, 0.1);
    let settings = Settings { memory: Some(400.0), ..Settings::new(8, 3) };
    let (mut low, mut high) = (learn::<f64>(settings, &plain), Tracker::<f64>::new(settings).unwrap());
    for row in &plain {
        let lifted: Vec<f64> = row.iter().map(|x| x + 1e9).collect();
        high.update(&lifted, 1.0).unwrap();
    }
    low.refresh().unwrap();
    high.refresh().unwrap();
    // The rows themselves are rounded to 1.2e-7.
    for (got, expected) in high.energies().iter().zip(low.energies()) {
        assert!((got - expected).abs() < 4.0 * 1e9 * EPS * expected.sqrt(), "{got} against {expected}");
    }
    for (got, expected) in high.mean().iter().zip(low.mean()) {
        assert!((got - 1e9 - expected).abs() < 2.0 * 1e9 * EPS, "{got} against {expected}");
    }
}

#[test]
fn with_nothing_forgotten_a_far_mean_moves_by_steps_below_its_last_digit() {
    // Steps of 1e-6 and less on a mean of 1e9, whose last digit is 1.2e-7: rounded away one by one they would leave the
    // mean where the first hundred thousand rows put it.
    let settings = Settings { guard: Some(0), ..Settings::new(2, 1) };
    let mut tracker = Tracker::<f64>::new(settings).unwrap();
    let rows = 400_000;
    for index in 0..rows {
        let level = if index < rows / 4 { 0.0 } else { 0.0625 };
        tracker.update(&[1e9 + level, 1e9 - level], 1.0).unwrap();
    }
    let expected = 0.0625 * 0.75;
    assert!((tracker.mean()[0] - 1e9 - expected).abs() <= 1e9 * EPS, "{}", tracker.mean()[0] - 1e9);
    assert!((tracker.mean()[1] - 1e9 + expected).abs() <= 1e9 * EPS);
}

#[test]
fn a_row_a_million_times_the_usual_breaks_nothing() {
    let rows = plant(73, 3000, 10, 4, 0.1);
    let mut tracker = learn::<f64>(Settings { memory: Some(100.0), ..Settings::new(10, 3) }, &rows[..500]);
    let glitch: Vec<f64> = rows[0].iter().map(|x| -1e6 * x).collect();
    tracker.update(&glitch, 1.0).unwrap();
    assert!(tracker.orthogonality_error().unwrap() <= 1e-14);
    for _ in 0..3 {
        learn_more(&mut tracker, &rows);
    }
    let batch = Batch::of(&rows, &forgotten(3000, Some(100.0)), true);
    tracker.refresh().unwrap();
    for (got, expected) in tracker.energies().iter().zip(&batch.energies) {
        assert!((got - expected).abs() <= 0.02 * expected, "{got} against {expected}");
    }
}

#[test]
fn a_small_energy_beside_a_large_one_keeps_its_digits() {
    // Strengths 1 and 1e-6, energies 1 and 1e-12: in a covariance the small one would keep four digits.
    let mut next = Noise(79);
    let rows: Vec<Vec<f64>> = (0..200)
        .map(|_| {
            let (large, small) = (next.next(), 1e-6 * next.next());
            vec![large + small, large - small, 2.0 * large + 3.0 * small, -large]
        })
        .collect();
    let mut tracker = learn::<f64>(Settings { guard: Some(2), ..Settings::new(4, 2) }, &rows);
    let batch = Batch::of(&rows, &forgotten(200, None), true);
    tracker.refresh().unwrap();
    let (got, expected) = (tracker.energies()[1], batch.energies[1]);
    assert!((got / expected - 1.0).abs() < 1e-8, "{got:e} against {expected:e}");
}

#[test]
#[ignore = "a minute long; run with `--release -- --ignored`"]
fn orthonormality_holds_after_1e7_updates() {
    let rows = plant(101, 4096, 64, 8, 1.0);
    let mut tracker = learn::<f64>(Settings { memory: Some(500.0), ..Settings::new(64, 6) }, &rows);
    let mut worst = 0.0_f64;
    for _ in 0..2442 {
        learn_more(&mut tracker, &rows);
        worst = worst.max(tracker.orthogonality_error().unwrap());
    }
    assert!(tracker.samples() > 10_000_000);
    println!("worst |I - Q Q^T| at 2442 looks: {worst:e}");
    assert!(worst <= 1e-14, "{worst:e}");
}

#[test]
fn rows_of_noise_alone_whose_directions_are_all_alike_leave_basis_and_trace_sound() {
    for (channels, rank) in [(2000, 20), (500, 20), (200, 3), (64, 6)] {
        let mut noise = Noise(77);
        let mut tracker = Tracker::<f64>::new(Settings::new(channels, rank)).unwrap();
        let (mut mean, mut scatter) = (vec![0.0; channels], 0.0);
        for count in 0..150_u32 {
            // Sums of six uniform numbers: all directions of nearly the same energy.
            let row: Vec<f64> = (0..channels).map(|_| (0..6).map(|_| noise.next()).sum()).collect();
            assert!(tracker.update(&row, 1.0).unwrap().learned());
            let share = f64::from(count) / f64::from(count + 1);
            for (mean, value) in mean.iter_mut().zip(&row) {
                scatter += share * (value - *mean).powi(2);
                *mean += (value - *mean) / f64::from(count + 1);
            }
        }
        assert!(tracker.orthogonality_error().unwrap() <= 1e-14, "{channels} x {rank}");
        tracker.refresh().unwrap();
        let total = tracker.total_energy() * tracker.total_weight();
        assert!(
            (total - scatter).abs() <= 1e3 * EPS * scatter,
            "{channels} x {rank}: {total} against {scatter}"
        );
    }
}
