//! Once its capacity stands, the basis allocates nothing; nor does the tracker, nor the watch once settled.
#![allow(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
#![allow(unsafe_code, reason = "an allocator that counts has to be one: GlobalAlloc is an unsafe trait")]

use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;
use std::hint::black_box;

use perpend::tracker::{self, Tracker};
use perpend::watch::{Limits, Phase, Settings, Watch};
use perpend::{Basis, Scalar, ops};

#[path = "watch_stream.rs"]
mod watch_stream;

use watch_stream::{CHANNELS, each, healthy};

/// The system's allocator, counting what the thread asks of it.
struct Counting;

thread_local! {
    /// Requests of this thread so far: other tests run beside this one.
    static REQUESTS: Cell<usize> = const { Cell::new(0) };
}

fn count() {
    REQUESTS.set(REQUESTS.get() + 1);
}

// SAFETY: every request goes to the system's allocator as it came; counting touches a thread-local cell with neither
// initializer nor destructor, which allocates nothing.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        count();
        // SAFETY: the caller's promise about `layout` is handed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn alloc_zeroed(&self, layout: Layout) -> *mut u8 {
        count();
        // SAFETY: as above.
        unsafe { System.alloc_zeroed(layout) }
    }

    unsafe fn realloc(&self, block: *mut u8, layout: Layout, size: usize) -> *mut u8 {
        count();
        // SAFETY: the caller's promises about `block`, `layout` and `size` are handed on; `block` came from `System`.
        unsafe { System.realloc(block, layout, size) }
    }

    unsafe fn dealloc(&self, block: *mut u8, layout: Layout) {
        // SAFETY: the caller's promises about `block` and `layout` are handed on; `block` came from `System`.
        unsafe { System.dealloc(block, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// Requests for memory made by `work`.
fn requests(work: impl FnOnce()) -> usize {
    let before = REQUESTS.get();
    work();
    REQUESTS.get() - before
}

const DIM: usize = 300;
const CAPACITY: usize = 24;

/// Reproducible vectors, more than the capacity, every third a combination of the two before it.
fn vectors() -> Vec<Vec<f64>> {
    let mut state = 20_261_201_u64;
    let mut vectors: Vec<Vec<f64>> = Vec::new();
    for index in 0..2 * CAPACITY {
        vectors.push(if index % 3 == 2 {
            vectors[index - 1].iter().zip(&vectors[index - 2]).map(|(a, b)| a - 0.5 * b).collect()
        } else {
            let entry = || {
                state = state.wrapping_mul(2_862_933_555_777_941_757).wrapping_add(3_037_000_493);
                (state >> 11) as f64 / (1u64 << 52) as f64 - 1.0
            };
            std::iter::repeat_with(entry).take(DIM).collect()
        });
    }
    vectors
}

#[test]
fn the_counter_counts() {
    assert!(requests(|| drop(black_box(vec![1.0; DIM]))) > 0);
    assert_eq!(requests(|| assert!(black_box([1.0; DIM])[0] > 0.0)), 0);
}

/// The control: without a capacity the same work must show.
#[test]
fn a_basis_without_capacity_allocates_as_it_grows() {
    let vectors = vectors();
    let mut basis = Basis::<f64>::new(DIM, None, None).unwrap();
    let seen = requests(|| {
        for vector in &vectors {
            basis.add(vector).unwrap();
        }
    });
    assert!(seen > 0, "growing past the first rows must ask for memory");
}

fn allocates_nothing<T: Scalar>() {
    // Which instructions to use is found out once a process, from the environment: that asks for memory.
    black_box(ops::Path::current());
    let vectors = vectors();
    let mut basis = Basis::<T>::new(DIM, Some(CAPACITY), None).unwrap();
    let mut accepted = 0;
    let adding = requests(|| {
        for vector in &vectors {
            accepted += usize::from(basis.add(vector).unwrap().accepted());
        }
    });
    // Accepted, dependent and one too many, each of them.
    assert_eq!((accepted, basis.rank()), (CAPACITY, CAPACITY));
    assert_eq!(adding, 0, "add");
    let splitting = requests(|| {
        for vector in &vectors {
            black_box(basis.split(vector).unwrap());
        }
    });
    assert_eq!(splitting, 0, "split");
    let sliding = requests(|| {
        for vector in &vectors {
            if basis.rank() > CAPACITY / 2 {
                basis.drop(basis.rank() / 2).unwrap();
            }
            basis.add(vector).unwrap();
        }
    });
    assert_eq!(sliding, 0, "drop and add");
    let far = requests(|| {
        let tiny = [f64::MIN_POSITIVE; DIM];
        basis.split(&tiny).unwrap();
    });
    assert_eq!(far, 0, "a vector that has to be scaled");
}

#[test]
fn once_its_capacity_stands_a_basis_allocates_nothing() {
    allocates_nothing::<f64>();
    allocates_nothing::<f32>();
}

/// Row by row from the first one on, in blocks from the second one on: among the channels and among the rows.
#[test]
fn a_tracker_allocates_nothing_but_room_for_its_first_block() {
    black_box(ops::Path::current());
    for channels in [CHANNELS, 6 * CHANNELS] {
        let settings = tracker::Settings { memory: Some(200.0), ..tracker::Settings::new(channels, 3) };
        let mut tracker = Tracker::<f64>::new(settings).unwrap();
        let mut rows = healthy(2_400 * channels / CHANNELS, 3);
        rows[1_000 * channels + 5] = f64::NAN;
        let (first, rest) = rows.split_at(1_200 * channels);
        let one_by_one = requests(|| {
            for row in first.chunks_exact(channels) {
                tracker.update(row, 1.0).unwrap();
            }
        });
        assert_eq!(one_by_one, 0, "{channels} channels");
        assert!(requests(|| tracker.update_rows(first).unwrap()) > 0, "room for the first block");
        assert_eq!(requests(|| tracker.update_rows(rest).unwrap()), 0, "{channels} channels");
    }
}

/// Healthy rows, gaps, an alarm, its adoption and the peace after it: each tick without a request.
#[test]
fn once_settled_a_tick_allocates_nothing() {
    black_box(ops::Path::current());
    for limits in [Limits::Moments, Limits::Empirical, Limits::Spectrum] {
        let settings = Settings { limits, hold: 50, ..Settings::new(CHANNELS) };
        let mut watch = Watch::<f64>::new(settings).unwrap();
        watch.settle_on(&healthy(300, 1)).unwrap();
        let mut rows = healthy(2_000, 2);
        for (tick, row) in rows.chunks_exact_mut(CHANNELS).enumerate() {
            if tick % 9 == 0 {
                row[tick % CHANNELS] = f64::NAN;
            }
            if tick >= 1_000 {
                row[3] += 30.0;
            }
        }
        let mut seen = [false; 5];
        let ticking = requests(|| {
            for row in each(&rows) {
                seen[watch.tick(row).unwrap().phase as usize] = true;
            }
        });
        let all = [Phase::Healthy, Phase::Exceeding, Phase::Alarmed, Phase::Adopting];
        assert!(all.iter().all(|phase| seen[*phase as usize]), "{limits:?}: {seen:?}");
        assert_eq!(ticking, 0, "{limits:?}");
    }
}
