//! The binding: thin, one file a class. The documentation of its classes is in `_core.pyi`.
#![allow(
    clippy::doc_markdown,
    clippy::doc_link_with_quotes,
    clippy::doc_lazy_continuation,
    reason = "what the stub documents is numpydoc, examples included"
)]

/// The documentation that `_core.pyi` gives a class or one of its members; the build script lays it out.
macro_rules! stub_doc {
    ($name:literal) => {
        include_str!(concat!(env!("OUT_DIR"), "/", $name, ".txt"))
    };
}

mod basis;
mod beside;
mod convert;
mod errors;
mod fork;
mod guarded;
mod reading;
mod saving;
mod state;
mod step;
mod tracker;
mod watch;

use pyo3::prelude::*;

use crate::ops::Path;
use errors::StateError;

/// The kernel of perpend. It relies on the interpreter's lock: see `fork`.
#[pymodule(gil_used = true)]
mod _core {
    use super::{Bound, Path, PyModule, PyModuleMethods, PyResult, StateError, fork, pyfunction};

    #[pymodule_export]
    use super::basis::PyBasis;
    #[pymodule_export]
    use super::reading::PyReading;
    #[pymodule_export]
    use super::step::Step;
    #[pymodule_export]
    use super::tracker::PyTracker;
    #[pymodule_export]
    use super::watch::PyWatch;

    #[doc = stub_doc!("kernel_path")]
    #[pyfunction]
    fn kernel_path() -> &'static str {
        Path::current().name()
    }

    /// Refuses to load where the environment asks for instructions this processor does not have.
    #[pymodule_init]
    fn init(module: &Bound<'_, PyModule>) -> PyResult<()> {
        Path::requested()?;
        fork::register(module)?;
        module.add("StateError", module.py().get_type::<StateError>())?;
        module.add("__version__", env!("CARGO_PKG_VERSION"))
    }
}
