//! States: what is read back goes on as if nothing had happened.

use perpend::basis::Tolerance;
use perpend::tracker::Settings;
use perpend::{Basis, Error, Scalar, State, Tracker};
use proptest::prelude::*;

use crate::state_refusals::Forgery;

pub struct Noise(pub u64);

impl Noise {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(2_862_933_555_777_941_757).wrapping_add(3_037_000_493);
        (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
    }

    pub fn row(&mut self, length: usize) -> Vec<f64> {
        (0..length).map(|_| self.next()).collect()
    }
}

/// A basis of a few vectors that has been grown and cut.
pub fn basis<T: Scalar>(dim: usize, capacity: Option<usize>) -> Basis<T> {
    let mut noise = Noise(7);
    let mut basis = Basis::new(dim, capacity, None).unwrap();
    for _ in 0..3 {
        basis.add(&noise.row(dim)).unwrap();
    }
    basis.drop(0).unwrap();
    basis
}

/// A tracker that has learned, skipped, given up directions and shown its axes.
pub fn tracker<T: Scalar>(settings: Settings) -> Tracker<T> {
    let mut noise = Noise(3);
    let mut tracker = Tracker::new(settings).unwrap();
    for tick in 0..40 {
        let mut row = noise.row(settings.channels);
        row[0] += 100.0;
        if tick % 7 == 0 {
            row[tick % settings.channels] = f64::NAN;
        }
        tracker.update(&row, 1.0).unwrap();
        if tick == 20 {
            tracker.refresh().unwrap();
        }
    }
    tracker.update(&vec![f64::NAN; settings.channels], 1.0).unwrap();
    tracker
}

pub fn small() -> Settings {
    Settings { memory: Some(20.0), guard: Some(1), ..Settings::new(4, 1) }
}

#[test]
fn reading_what_was_written_gives_the_same_bytes() {
    fn check<S: State>(object: &S) {
        let bytes = object.to_bytes().unwrap();
        assert_eq!(object.to_bytes().unwrap(), bytes);
        assert_eq!(S::from_bytes(&bytes).unwrap().to_bytes().unwrap(), bytes);
    }
    for capacity in [None, Some(4), Some(5)] {
        check(&basis::<f64>(5, capacity));
        check(&basis::<f32>(5, capacity));
    }
    check(&Basis::<f64>::new(1, Some(0), None).unwrap());
    check(&Basis::<f32>::new(300, Some(200), Some(Tolerance { relative: 1e-3, absolute: 0.125 })).unwrap());
    check(&tracker::<f64>(small()));
    check(&tracker::<f32>(Settings { center: false, memory: None, guard: None, ..small() }));
    check(&Tracker::<f64>::new(Settings::new(1, 1)).unwrap());
}

/// One thing done to a basis; what it gives, to the last bit.
fn do_to_basis<T: Scalar>(basis: &mut Basis<T>, operation: u8, noise: &mut Noise) -> Vec<u64> {
    let dim = basis.dim();
    match operation {
        0..=4 => {
            let mut vector = noise.row(dim);
            if operation == 0 {
                vector = vector.iter().map(|entry| entry * 1e-160).collect();
            }
            let step = basis.add(&vector).unwrap();
            [step.residual_norm, step.loss].iter().map(|figure| figure.to_bits()).collect()
        }
        5 => {
            let mut steps = Vec::new();
            basis.add_rows(&noise.row(3 * dim), &mut steps).unwrap();
            steps.iter().map(|step| step.residual_norm.to_bits()).collect()
        }
        6 | 7 => {
            if basis.rank() > 0 {
                basis.drop(usize::from(operation) % basis.rank()).unwrap();
            }
            Vec::new()
        }
        _ => {
            let solution = basis.solve(&noise.row(dim)).unwrap();
            solution.weights.iter().map(|weight| weight.to_bits()).collect()
        }
    }
}

/// One thing done to a tracker; what it gives, to the last bit.
fn do_to_tracker<T: Scalar>(tracker: &mut Tracker<T>, operation: u8, noise: &mut Noise) -> Vec<u64> {
    let channels = tracker.settings().channels;
    let mut row = noise.row(channels);
    match operation {
        0..=3 => {
            tracker.update_after(&row, 0.5 + f64::from(operation), 1.0 + f64::from(operation)).unwrap();
            Vec::new()
        }
        4 => {
            row[0] = f64::NAN;
            tracker.update(&row, 1.0).unwrap();
            Vec::new()
        }
        5 => {
            let mut other = Tracker::new(*tracker.settings()).unwrap();
            other.update(&row, 2.0).unwrap();
            tracker.merge(&other).unwrap();
            Vec::new()
        }
        6 => {
            tracker.refresh().unwrap();
            if tracker.samples().is_multiple_of(5) {
                tracker.follow_share(0.6).unwrap();
            }
            tracker.energies().iter().map(|energy| energy.to_bits()).collect()
        }
        _ => {
            let (mut scores, mut residual) = (vec![0.0; tracker.settings().rank], vec![0.0; channels]);
            tracker.split_as_refreshed_into(&row, &mut scores, &mut residual).unwrap();
            scores.iter().chain(&residual).map(|figure| figure.to_bits()).collect()
        }
    }
}

/// Runs the operations twice: through, and interrupted by a restart before every operation marked.
fn restarts_change_nothing<S: State>(
    mut through: S,
    operations: &[(u8, bool)],
    act: impl Fn(&mut S, u8, &mut Noise) -> Vec<u64>,
) {
    let (mut noise, mut same_noise) = (Noise(11), Noise(11));
    let mut restarted = S::from_bytes(&through.to_bytes().unwrap()).unwrap();
    for &(operation, restart) in operations {
        if restart {
            restarted = S::from_bytes(&restarted.to_bytes().unwrap()).unwrap();
        }
        let expected = act(&mut through, operation, &mut noise);
        assert_eq!(act(&mut restarted, operation, &mut same_noise), expected, "operation {operation}");
        assert_eq!(restarted.to_bytes().unwrap(), through.to_bytes().unwrap(), "operation {operation}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn a_basis_goes_on_bit_for_bit(
        operations in prop::collection::vec((0u8..9, any::<bool>()), 1..40),
        capacity in prop::option::of(0usize..12),
    ) {
        let wide = Basis::<f64>::new(11, capacity.map(|capacity| capacity.min(11)), None).unwrap();
        restarts_change_nothing(wide, &operations, do_to_basis);
        let narrow = Basis::<f32>::new(40, capacity, None).unwrap();
        restarts_change_nothing(narrow, &operations, do_to_basis);
    }

    #[test]
    fn a_tracker_goes_on_bit_for_bit(
        operations in prop::collection::vec((0u8..8, any::<bool>()), 1..60),
        memory in prop::option::of(2.0..50.0),
        center in any::<bool>(),
        rank in 1usize..4,
    ) {
        let settings = Settings { memory, center, guard: Some(2), ..Settings::new(9, rank) };
        restarts_change_nothing(Tracker::<f64>::new(settings).unwrap(), &operations, do_to_tracker);
        restarts_change_nothing(Tracker::<f32>::new(settings).unwrap(), &operations, do_to_tracker);
    }
}

#[test]
fn a_basis_read_back_takes_no_more_room_than_it_needs_and_still_holds_its_capacity() {
    // 100,000 rows of 100,000 would be eighty gigabytes.
    let mut large = Basis::<f64>::new(100_000, None, None).unwrap();
    large.add(&Noise(1).row(100_000)).unwrap();
    let forgery = Forgery::of(&large.to_bytes().unwrap()).word("basis.capacity", "100000");
    let mut read = Basis::<f64>::from_bytes(&forgery.bytes()).unwrap();
    assert_eq!(read.capacity(), 100_000);
    assert!(read.add(&Noise(2).row(100_000)).unwrap().accepted());

    let mut full = basis::<f64>(6, Some(4));
    full = Basis::from_bytes(&full.to_bytes().unwrap()).unwrap();
    let mut noise = Noise(5);
    let accepted = (0..4).filter(|_| full.add(&noise.row(6)).unwrap().accepted()).count();
    assert_eq!((accepted, full.rank()), (2, 4));
}

#[test]
fn what_could_not_be_read_is_not_written() {
    // Ticks that are finite one by one, and not as a sum.
    let mut tracker = Tracker::<f64>::new(Settings::new(2, 1)).unwrap();
    tracker.update_after(&[1.0, 2.0], 1.0, f64::MAX).unwrap();
    tracker.update_after(&[2.0, 1.0], 1.0, f64::MAX).unwrap();
    let expected = "tracker.clock: expected finite numbers, got inf at 0".into();
    assert_eq!(tracker.to_bytes(), Err(Error::State { what: expected }));
}
