//! A process that is forked: the child gets every object whole, and every lock open.
//!
//! Of the threads, a child has the one that forked. A lock that another one held at that moment would stay shut in the child
//! for ever, and what it was working on would stay half done. So whoever works on an object without holding the interpreter
//! (which the forking thread holds) keeps a share of one gate, and a fork waits until nobody does: as long as the piece of
//! work at hand takes, some milliseconds for the calls that take rows.
//!
//! Python runs the two functions here before and after its own forks (`os.fork`, and what rests on it). A fork made by
//! foreign code behind the interpreter's back is not seen.

use std::cell::RefCell;
use std::sync::{PoisonError, RwLock, RwLockReadGuard, RwLockWriteGuard};

use pyo3::prelude::*;
use pyo3::sync::RwLockExt;
use pyo3::types::PyDict;

static GATE: RwLock<()> = RwLock::new(());

thread_local! {
    /// The whole of the gate, from before a fork by this thread until after it.
    static CLOSED: RefCell<Option<RwLockWriteGuard<'static, ()>>> = const { RefCell::new(None) };
}

/// A share of the gate; none for the thread that has closed it, which does not wait for itself.
pub(super) type Share = Option<RwLockReadGuard<'static, ()>>;

fn closed_here() -> bool {
    CLOSED.with_borrow(Option::is_some)
}

/// No fork while this is held. For a thread that does not hold the interpreter.
pub(super) fn put_off() -> Share {
    if closed_here() { None } else { Some(GATE.read().unwrap_or_else(PoisonError::into_inner)) }
}

/// The same for a thread that holds it, and lets go of it while it waits.
pub(super) fn put_off_attached(py: Python<'_>) -> Share {
    if closed_here() { None } else { Some(GATE.read_py_attached(py).unwrap_or_else(PoisonError::into_inner)) }
}

/// Waits until nobody works detached, and keeps it so.
#[pyfunction]
fn close_gate(py: Python<'_>) {
    // Whoever holds a share may need the interpreter to give it back.
    py.detach(|| {
        if !closed_here() {
            let whole = GATE.write().unwrap_or_else(PoisonError::into_inner);
            CLOSED.set(Some(whole));
        }
    });
}

/// In the parent, and in the child, whose only thread is the one that closed it.
#[pyfunction]
fn open_gate() {
    CLOSED.set(None);
}

/// Has Python call these at its forks, where it has any.
pub(super) fn register(module: &Bound<'_, PyModule>) -> PyResult<()> {
    let py = module.py();
    let Ok(register) = py.import("os")?.getattr("register_at_fork") else { return Ok(()) };
    let open = wrap_pyfunction!(open_gate, module)?;
    let hooks = PyDict::new(py);
    hooks.set_item("before", wrap_pyfunction!(close_gate, module)?)?;
    hooks.set_item("after_in_parent", &open)?;
    hooks.set_item("after_in_child", &open)?;
    register.call((), Some(&hooks)).map(drop)
}
