//! The binding: thin, one file a class.

use pyo3::prelude::*;

#[pymodule]
mod _core {}
