//! The one map from kernel errors to Python exceptions, and the fence that keeps a panic from Python.

use std::panic::{AssertUnwindSafe, catch_unwind};

use pyo3::exceptions::{PyMemoryError, PyRuntimeError, PyValueError};
use pyo3::{PyErr, create_exception};

use crate::Error;

create_exception!(
    perpend,
    StateError,
    PyValueError,
    "Bytes or a file hold no state of the object asked for: cut off, changed, of another class, or of a later release."
);

impl From<Error> for PyErr {
    fn from(error: Error) -> Self {
        let message = error.to_string();
        match error {
            Error::Length { .. }
            | Error::NonFinite { .. }
            | Error::Overflow { .. }
            | Error::Parameter { .. }
            | Error::Unlike { .. }
            | Error::InRow { .. } => PyValueError::new_err(message),
            Error::State { .. } => StateError::new_err(message),
            Error::Memory { .. } => PyMemoryError::new_err(message),
            Error::NoConvergence { .. } => PyRuntimeError::new_err(message),
        }
    }
}

/// Runs kernel code; a panic in it, which would be a defect of ours, becomes a `RuntimeError`.
pub(super) fn fenced<R>(call: impl FnOnce() -> Result<R, Error>) -> Result<R, PyErr> {
    match catch_unwind(AssertUnwindSafe(call)) {
        Ok(outcome) => outcome.map_err(PyErr::from),
        Err(_) => {
            Err(PyRuntimeError::new_err("a defect in perpend: the kernel stopped; make the object anew"))
        }
    }
}
