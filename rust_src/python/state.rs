//! What all classes with a state share: bytes and files, out and in.

use std::path::PathBuf;

use pyo3::buffer::PyBuffer;
use pyo3::exceptions::PyTypeError;
use pyo3::prelude::*;
use pyo3::types::PyBytes;

use super::errors::fenced;
use super::guarded::Guarded;
use super::saving;
use crate::Error;

/// A kernel object of either stored type, whose state can be written and read.
pub(super) trait Kept: Sized + Send {
    fn to_bytes(&self) -> Result<Vec<u8>, Error>;
    fn from_bytes(bytes: &[u8]) -> Result<Self, Error>;
}

/// Implements it for an `Inner` of two types.
macro_rules! kept {
    ($inner:ident) => {
        impl $crate::python::state::Kept for $inner {
            fn to_bytes(&self) -> Result<Vec<u8>, $crate::Error> {
                either!(self, object => $crate::State::to_bytes(object))
            }

            fn from_bytes(bytes: &[u8]) -> Result<Self, $crate::Error> {
                let reader = $crate::state::Reader::open(bytes)?;
                if reader.dtype() == <f32 as $crate::Scalar>::NAME {
                    return Ok(Self::Float32(reader.restore()?));
                }
                Ok(Self::Float64(reader.restore()?))
            }
        }
    };
}
pub(super) use kept;

/// The state of an object, the interpreter being released meanwhile.
pub(super) fn to_bytes<S: Kept>(py: Python<'_>, object: &Guarded<S>) -> PyResult<Vec<u8>> {
    py.detach(|| object.alone(|object| object.to_bytes()))
}

/// The object whose state `data` is: `bytes`, or anything that lends its bytes.
pub(super) fn from_bytes<S: Kept>(data: &Bound<'_, PyAny>) -> PyResult<S> {
    let py = data.py();
    if let Ok(bytes) = data.cast::<PyBytes>() {
        let bytes = bytes.as_bytes();
        return py.detach(|| fenced(|| S::from_bytes(bytes)));
    }
    // Others could write to it meanwhile: a copy.
    let copy = PyBuffer::<u8>::get(data).and_then(|buffer| buffer.to_vec(py)).map_err(|_| {
        let kind = data.get_type().name().map_or_else(|_| "another type".into(), |name| name.to_string());
        PyTypeError::new_err(format!("data: expected bytes, got {kind}"))
    })?;
    py.detach(|| fenced(|| S::from_bytes(&copy)))
}

/// Writes the state of an object to a file.
pub(super) fn save<S: Kept>(object: &Guarded<S>, path: &Bound<'_, PyAny>) -> PyResult<()> {
    let (py, path) = (path.py(), path.extract::<PathBuf>()?);
    let bytes = to_bytes(py, object)?;
    py.detach(|| saving::replace(&path, &bytes)).map_err(|error| saving::exception(py, &path, &error))
}

/// The object whose state a file holds.
pub(super) fn load<S: Kept>(path: &Bound<'_, PyAny>) -> PyResult<S> {
    let (py, path) = (path.py(), path.extract::<PathBuf>()?);
    let bytes = py.detach(|| saving::read(&path)).map_err(|error| saving::exception(py, &path, &error))?;
    py.detach(|| {
        fenced(|| {
            S::from_bytes(&bytes).map_err(|error| match error {
                Error::State { what } => Error::State { what: format!("{}: {what}", path.display()) },
                other => other,
            })
        })
    })
}
