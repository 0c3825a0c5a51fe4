//! The tracker against the decomposition of all rows at once.

mod admitting;
mod blocks;
mod gaps;
mod hardship;
mod merging;
mod refusals;

use perpend::dense::Svd;
use perpend::tracker::{Settings, Skipped, Tracker};
use perpend::{Error, Rows, Scalar};

const EPS: f64 = f64::EPSILON;

/// Numbers like those of a sensor, from a seed: uniform in -1..1 (xorshift64*, Marsaglia 2003, Vigna 2016).
struct Noise(u64);

impl Noise {
    fn next(&mut self) -> f64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        (self.0.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11) as f64 / 2f64.powi(52) - 1.0
    }
}

/// Rows of a few sources of falling strength, mixed into `channels`, with `noise` beside them.
fn plant(seed: u64, rows: usize, channels: usize, sources: usize, noise: f64) -> Vec<Vec<f64>> {
    let mut next = Noise(seed | 1);
    let mixing: Vec<f64> = (0..sources * channels).map(|_| next.next()).collect();
    let mut row = || {
        let states: Vec<f64> =
            (0..sources).map(|source| next.next() * 10.0 * 0.5_f64.powf(source as f64)).collect();
        (0..channels)
            .map(|channel| {
                let mixed: f64 = (0..sources).map(|s| states[s] * mixing[s * channels + channel]).sum();
                20.0 + channel as f64 + mixed + noise * next.next()
            })
            .collect()
    };
    (0..rows).map(|_| row()).collect()
}

/// The exact answer: mean, energies and axes of the weighted rows.
struct Batch {
    mean: Vec<f64>,
    energies: Vec<f64>,
    svd: Svd,
}

impl Batch {
    fn of(rows: &[Vec<f64>], weights: &[f64], center: bool) -> Self {
        let (total, channels) = (weights.iter().sum::<f64>(), rows[0].len());
        let mut mean = vec![0.0; channels];
        if center {
            for (row, weight) in rows.iter().zip(weights) {
                mean.iter_mut().zip(row).for_each(|(mean, x)| *mean += weight * x / total);
            }
        }
        let matrix: Vec<f64> = rows
            .iter()
            .zip(weights)
            .flat_map(|(row, weight)| row.iter().zip(&mean).map(move |(x, mean)| weight.sqrt() * (x - mean)))
            .collect();
        let mut svd = Svd::new(rows.len(), channels);
        svd.decompose(&matrix).unwrap();
        let energies = svd.values().iter().map(|value| value * value / total).collect();
        Self { mean, energies, svd }
    }

    /// The leading `rank` axes, row-major.
    fn axes(&self, rank: usize) -> Vec<f64> {
        (0..rank).flat_map(|index| self.svd.right(index).to_vec()).collect()
    }
}

fn forgotten(rows: usize, memory: Option<f64>) -> Vec<f64> {
    let kept = memory.map_or(1.0, |memory| 1.0 - 1.0 / memory);
    (0..rows).map(|row| kept.powf((rows - 1 - row) as f64)).collect()
}

fn largest_angle<T: Scalar>(tracker: &Tracker<T>, exact: &[f64]) -> f64 {
    let channels = tracker.settings().channels;
    let exact = Rows::new(exact, channels, exact.len() / channels, channels).unwrap();
    *perpend::principal_angles(tracker.axes(), exact).unwrap().last().unwrap()
}

/// Means, energies and axes agree to `slack` relative to the largest.
fn assert_equals<T: Scalar>(tracker: &mut Tracker<T>, batch: &Batch, slack: f64) {
    tracker.refresh().unwrap();
    let scale = batch.energies[0];
    for (got, expected) in tracker.mean().iter().zip(&batch.mean) {
        assert!(
            (got - expected).abs() <= slack * expected.abs().max(scale.sqrt()),
            "{got} against {expected}"
        );
    }
    for (got, expected) in tracker.energies().iter().zip(&batch.energies) {
        assert!((got - expected).abs() <= slack * scale, "energy {got:e} against {expected:e}");
    }
    let rank = tracker.energies().len();
    let angle = largest_angle(tracker, &batch.axes(rank));
    let gap = batch.energies[rank - 1].sqrt() - batch.energies.get(rank).map_or(0.0, |next| next.sqrt());
    assert!(angle <= slack * scale.sqrt() / gap, "angle {angle:e}, relative gap {:e}", gap / scale.sqrt());
}

/// Rounding of `rows` updates of `channels` entries: each leaves a few eps of the largest singular value.
fn rounding(rows: usize, channels: usize) -> f64 {
    16.0 * EPS * (rows as f64).sqrt() * channels as f64
}

fn learn<T: Scalar>(settings: Settings, rows: &[Vec<f64>]) -> Tracker<T> {
    let mut tracker = Tracker::new(settings).unwrap();
    learn_more(&mut tracker, rows);
    tracker
}

fn learn_more<T: Scalar>(tracker: &mut Tracker<T>, rows: &[Vec<f64>]) {
    for row in rows {
        assert!(tracker.update(row, 1.0).unwrap().learned());
    }
}

#[test]
fn nothing_forgotten_and_nothing_truncated_equals_the_batch() {
    for (channels, rank, count) in [(5, 2, 3), (9, 4, 9), (12, 4, 400), (12, 12, 57), (1, 1, 20)] {
        let rows = plant(7, count, channels, channels, 0.1);
        let settings = Settings { guard: Some(channels - rank), ..Settings::new(channels, rank) };
        let mut tracker = learn::<f64>(settings, &rows);
        let batch = Batch::of(&rows, &forgotten(count, None), true);
        assert_equals(&mut tracker, &batch, rounding(count, channels));
        assert_eq!(tracker.samples(), count as u64);
    }
}

#[test]
fn with_forgetting_it_equals_the_batch_of_weighted_rows() {
    for center in [true, false] {
        let rows = plant(11, 300, 10, 10, 0.1);
        let memory = Some(40.0);
        let settings = Settings { guard: Some(6), memory, center, ..Settings::new(10, 4) };
        let mut tracker = learn::<f64>(settings, &rows);
        let batch = Batch::of(&rows, &forgotten(300, memory), center);
        assert_equals(&mut tracker, &batch, rounding(300, 10));
    }
}

#[test]
fn weights_and_elapsed_ticks_equal_the_batch_of_weighted_rows() {
    let rows = plant(13, 80, 8, 8, 0.1);
    let settings = Settings { guard: Some(4), memory: Some(30.0), ..Settings::new(8, 4) };
    let mut tracker = Tracker::<f64>::new(settings).unwrap();
    let mut weights = Vec::new();
    for (index, row) in rows.iter().enumerate() {
        let (weight, elapsed) = ((index % 4) as f64 * 0.5, if index % 7 == 3 { 20.0 } else { 1.0 });
        let update = tracker.update_after(row, weight, elapsed).unwrap();
        assert_eq!(update.skipped, (weight == 0.0).then_some(Skipped::Weight));
        if weight > 0.0 {
            for old in &mut weights {
                *old *= (1.0 - 1.0 / 30.0_f64).powf(elapsed);
            }
        }
        weights.push(weight);
    }
    let batch = Batch::of(&rows, &weights, true);
    assert_equals(&mut tracker, &batch, rounding(80, 8));
    assert!(
        (tracker.total_weight() - weights.iter().sum::<f64>()).abs() < 80.0 * EPS * tracker.total_weight()
    );
}

#[test]
fn exact_rank_below_the_directions_tracked_is_found_and_adds_none() {
    let rows = plant(17, 500, 30, 3, 0.0);
    let mut tracker = learn::<f64>(Settings { memory: Some(50.0), ..Settings::new(30, 4) }, &rows);
    tracker.refresh().unwrap();
    let batch = Batch::of(&rows, &forgotten(500, Some(50.0)), true);
    for (got, expected) in tracker.energies().iter().zip(&batch.energies) {
        assert!((got - expected).abs() <= rounding(500, 30) * batch.energies[0]);
    }
    assert!(largest_angle(&tracker, &batch.axes(3)) < 1e-7);
}

#[test]
fn truncation_gives_the_subspace_of_rotate_and_cut() {
    // The oracle decomposes the bordered factor in full at every row and cuts.
    let (channels, rank, guard, memory) = (14, 3, 2, 200.0);
    let rows = plant(19, 600, channels, 8, 0.5);
    let settings =
        Settings { guard: Some(guard), memory: Some(memory), center: false, ..Settings::new(channels, rank) };
    let mut tracker = learn::<f64>(settings, &rows);
    let keep = rank + guard;
    let mut held = vec![0.0; keep * channels];
    let mut lost = 0.0;
    for row in &rows {
        let root = (1.0 - 1.0 / memory).sqrt();
        let mut matrix: Vec<f64> = held.iter().map(|x| root * x).collect();
        matrix.extend(row);
        let mut svd = Svd::new(keep + 1, channels);
        svd.decompose(&matrix).unwrap();
        for index in 0..keep {
            let value = svd.values()[index];
            held[index * channels..][..channels]
                .iter_mut()
                .zip(svd.right(index))
                .for_each(|(out, x)| *out = value * x);
        }
        lost = (1.0 - 1.0 / memory) * lost + svd.values()[keep].powi(2);
    }
    tracker.refresh().unwrap();
    let exact: Vec<f64> = (0..rank)
        .flat_map(|index| {
            let row = &held[index * channels..][..channels];
            let norm = row.iter().map(|x| x * x).sum::<f64>().sqrt();
            row.iter().map(move |x| x / norm)
        })
        .collect();
    let angle = largest_angle(&tracker, &exact);
    assert!(angle < 600.0 * channels as f64 * EPS * 10.0, "angle {angle:e}");
    let got = tracker.certificate().unwrap().lost * tracker.total_weight();
    assert!((got - lost).abs() < 1e-11 * lost, "lost {got:e} against {lost:e}");
}

#[test]
fn certificate_holds_the_exact_answer_and_its_trace_is_exact() {
    for (seed, guard) in [(23, 0), (29, 3), (31, 6)] {
        let mut rows = plant(seed, 400, 16, 5, 1.0);
        rows.extend(plant(seed + 100, 200, 16, 5, 1.0));
        let memory = Some(60.0);
        let settings = Settings { guard: Some(guard), memory, ..Settings::new(16, 3) };
        let mut tracker = learn::<f64>(settings, &rows);
        let certificate = tracker.certificate().unwrap();
        let batch = Batch::of(&rows, &forgotten(600, memory), true);
        let slack = rounding(600, 16) * batch.energies[0];
        for (index, exact) in batch.energies[..3].iter().enumerate() {
            assert!(
                tracker.energies()[index] <= exact + slack
                    && *exact <= tracker.energies()[index] + certificate.lost + slack
            );
        }
        let trace: f64 = batch.energies.iter().sum();
        assert!((tracker.total_energy() - trace).abs() < 1e-12 * trace);
        if let Some(sine) = certificate.sine {
            assert!(largest_angle(&tracker, &batch.axes(3)).sin() <= sine + slack);
        }
    }
}

#[test]
fn axes_keep_their_sign_from_refresh_to_refresh() {
    let rows = plant(83, 2000, 10, 4, 0.1);
    let mut tracker = learn::<f64>(Settings { memory: Some(300.0), ..Settings::new(10, 3) }, &rows[..200]);
    tracker.refresh().unwrap();
    for row in &rows[200..] {
        let before: Vec<Vec<f64>> = tracker.axes().iter().map(<[f64]>::to_vec).collect();
        tracker.update(row, 1.0).unwrap();
        assert!(tracker.is_stale());
        tracker.refresh().unwrap();
        for (axis, before) in tracker.axes().iter().zip(&before) {
            assert!(axis.iter().zip(before).map(|(a, b)| a * b).sum::<f64>() > 0.9);
        }
    }
}

#[test]
fn rank_follows_the_share_with_hysteresis_and_never_reaches_the_channels() {
    let mut next = Noise(97);
    let mut tracker = Tracker::<f64>::new(Settings { memory: Some(200.0), ..Settings::new(6, 6) }).unwrap();
    assert!(matches!(tracker.follow_share(1.0), Err(Error::Parameter { name: "share", .. })));
    tracker.follow_share(0.9).unwrap();
    // A third source comes up to a quarter of the variance and goes again.
    let mut ranks = Vec::new();
    for tick in 0..6000 {
        let third = if (2000..4000).contains(&tick) { 1.0 } else { 0.05 };
        let row: Vec<f64> = [2.0, 1.5, third, 0.1, 0.1, 0.1].iter().map(|size| size * next.next()).collect();
        tracker.update(&row, 1.0).unwrap();
        if tick > 500 {
            tracker.refresh().unwrap();
            assert_eq!(tracker.axes().count(), tracker.rank());
            assert!(tracker.explained() >= 0.9);
            ranks.push(tracker.rank());
        }
    }
    assert_eq!((ranks[1000], ranks[3000], ranks[5400]), (2, 3, 2));
    let changes = ranks.windows(2).filter(|pair| pair[0] != pair[1]).count();
    assert_eq!(changes, 2, "one up, one down");
    // Noise in all channels alike: all but one axis, however high the share.
    let mut tracker = Tracker::<f64>::new(Settings::new(4, 4)).unwrap();
    tracker.follow_share(0.999).unwrap();
    for _ in 0..300 {
        let row = [next.next(), next.next(), next.next(), next.next()];
        tracker.update(&row, 1.0).unwrap();
    }
    tracker.refresh().unwrap();
    assert_eq!(tracker.rank(), 3);
}
