//! Reading a state takes a small multiple of its length, whatever it claims.
#![allow(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
#![allow(unsafe_code, reason = "an allocator that counts has to be one: GlobalAlloc is an unsafe trait")]

use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;

use perpend::state::MOST_HEADER;
use perpend::tracker::Settings;
use perpend::watch::{self, Watch};
use perpend::{Basis, Scalar, State, Tracker};

/// The system's allocator, adding up what the thread holds.
struct Counting;

thread_local! {
    /// Bytes this thread holds, and the most it has held.
    static HELD: Cell<(isize, isize)> = const { Cell::new((0, 0)) };
}

fn count(bytes: isize) {
    let (held, most) = HELD.get();
    HELD.set((held + bytes, most.max(held + bytes)));
}

fn size(layout: Layout) -> isize {
    isize::try_from(layout.size()).unwrap_or(isize::MAX)
}

// SAFETY: every request goes to the system's allocator as it came; counting touches a thread-local cell with neither
// initializer nor destructor, which allocates nothing. Growing goes through `alloc`, by the trait's own default.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        count(size(layout));
        // SAFETY: the caller's promise about `layout` is handed on.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, block: *mut u8, layout: Layout) {
        count(-size(layout));
        // SAFETY: the caller's promises about `block` and `layout` are handed on; `block` came from `System`.
        unsafe { System.dealloc(block, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// Most bytes held while `bytes` are read, beyond what was held before.
fn room<S: State>(bytes: &[u8]) -> usize {
    let (before, _) = HELD.get();
    HELD.set((before, before));
    drop(S::from_bytes(bytes));
    usize::try_from(HELD.get().1 - before).unwrap()
}

/// Times its own length that reading a basis may take. The worst is a `float32` one of a single row, 4 bytes an entry: the
/// row, and four of workspace of 8 bytes each, asked for before they are taken: 9 times, and 3 for small change.
const TIMES_BASIS: usize = 12;
/// The same for a tracker. The worst is a `float32` one of as many axes as channels, n: a file of 8 n^2 bytes, of which what
/// is read takes as much again, before the constructor asks whether it can have (n + 6 n) (n + 2 n) numbers, 168 n^2
/// bytes, which it gives back untouched: 22 times, and 2 for what goes with n alone.
const TIMES_TRACKER: usize = 24;
/// The same for a watch that has settled. The worst is a `float32` one of as many axes as can be: the tracker in it, a second
/// one, and a copy of either on the way to new axes.
const TIMES_WATCH: usize = 48;
/// What parsing may take beside, per byte of header.
const HEADER_TIMES: usize = 64;

fn check<S: State>(state: &[u8], times: usize) {
    let taken = room::<S>(state);
    let header = usize::try_from(u64::from_le_bytes(state[..8].try_into().unwrap())).unwrap();
    assert!(taken <= times * state.len() + HEADER_TIMES * header, "{taken} bytes for {}", state.len());
}

fn check_classes<T: Scalar>() {
    for (dim, rank) in [(1, 0), (1, 1), (5000, 0), (5000, 1), (200, 100), (100, 100)] {
        let mut basis = Basis::<T>::new(dim, None, None).unwrap();
        for index in 0..rank {
            let vector: Vec<f64> = (0..dim).map(|place| f64::from(u8::from(place == index))).collect();
            assert!(basis.add(&vector).unwrap().accepted());
        }
        check::<Basis<T>>(&basis.to_bytes().unwrap(), TIMES_BASIS);
    }
    for (channels, rank) in [(1, 1), (300, 1), (300, 20), (100, 100)] {
        let tracker = Tracker::<T>::new(Settings::new(channels, rank)).unwrap();
        check::<Tracker<T>>(&tracker.to_bytes().unwrap(), TIMES_TRACKER);
    }
    for (channels, rank) in [(2, 1), (300, 1), (60, 59)] {
        let settings = watch::Settings { rank: Some(rank), ..watch::Settings::new(channels) };
        let mut watch = Watch::<T>::new(settings).unwrap();
        check::<Watch<T>>(&watch.to_bytes().unwrap(), TIMES_WATCH);
        let entry = |index: usize| ((index * index % 1009) as f64).sin() + (index % channels) as f64;
        let rows: Vec<f64> = (0..120 * channels).map(entry).collect();
        watch.settle_on(&rows).unwrap();
        check::<Watch<T>>(&watch.to_bytes().unwrap(), TIMES_WATCH);
    }
}

#[test]
fn a_state_takes_a_small_multiple_of_its_length() {
    check_classes::<f64>();
    check_classes::<f32>();
}

#[test]
fn a_header_made_to_be_large_takes_no_more_than_it_may() {
    let words = (0..).map(|index| format!("\"{index:x}\":\"\","));
    let arrays = (0..).map(|index| {
        format!("\"{index:x}\":{{\"dtype\":\"F64\",\"shape\":[0,0,0,0,0,0],\"data_offsets\":[0,0]}},")
    });
    let nested = std::iter::repeat("[0,0,0,0,0,0],".to_owned());
    let cases: [(&str, Box<dyn Iterator<Item = String>>, &str); 3] = [
        ("{\"__metadata__\":{", Box::new(words), "\"z\":\"\"}}"),
        ("{", Box::new(arrays), "\"z\":{\"dtype\":\"F64\",\"shape\":[0],\"data_offsets\":[0,0]}}"),
        ("{\"a\":[", Box::new(nested), "0]}"),
    ];
    for (start, items, end) in cases {
        let mut header = start.to_owned();
        for item in items {
            if header.len() + item.len() + end.len() > MOST_HEADER {
                break;
            }
            header.push_str(&item);
        }
        header.push_str(end);
        let state = [&(header.len() as u64).to_le_bytes(), header.as_bytes()].concat();
        check::<Basis<f64>>(&state, TIMES_BASIS);
        // One byte more than may be: nothing is parsed at all.
        let longer = [&(MOST_HEADER as u64 + 1).to_le_bytes(), &vec![b' '; 2 * MOST_HEADER][..]].concat();
        assert!(room::<Basis<f64>>(&longer) < 1000);
    }
}
