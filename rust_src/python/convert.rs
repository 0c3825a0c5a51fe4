//! Arrays in, arrays out.
//!
//! A contiguous row of `float64` in native byte order is read where it lies; not a subclass of arrays, which may
//! carry a mask. Anything else that NumPy can read
//! as real numbers (lists, strided, byte-swapped, other widths, objects with `__array__`) is copied once.

use numpy::{
    PyArray1, PyArray2, PyArrayMethods, PyReadonlyArray1, PyReadonlyArray2, PyUntypedArray,
    PyUntypedArrayMethods,
};
use pyo3::exceptions::{PyOverflowError, PyTypeError, PyValueError};
use pyo3::prelude::*;
use pyo3::sync::PyOnceLock;
use pyo3::types::PyString;

use crate::{Rows, Scalar};

/// A new array of one dimension.
pub(super) type Array1<'py, T> = Bound<'py, PyArray1<T>>;
/// A new array of two.
pub(super) type Array2<'py, T> = Bound<'py, PyArray2<T>>;

/// A row of numbers, borrowed from an array for the length of a call.
pub(super) struct Row<'py>(PyReadonlyArray1<'py, f64>);

impl<'py> Row<'py> {
    /// The interpreter it came from.
    pub fn py(&self) -> Python<'py> {
        self.0.py()
    }

    /// Its entries.
    pub fn entries(&self) -> PyResult<&[f64]> {
        self.0.as_slice().map_err(|_| PyValueError::new_err("vector: not contiguous"))
    }
}

/// Reads `object` as one row of numbers.
pub(super) fn row<'py>(object: &Bound<'py, PyAny>) -> PyResult<Row<'py>> {
    if object.is_exact_instance_of::<PyUntypedArray>()
        && let Ok(array) = object.cast::<PyArray1<f64>>()
        && array.is_contiguous()
        && array.is_aligned()
    {
        return Ok(Row(array.readonly()));
    }
    let array = as_float64(object)?;
    let got = dimensions(&array)?;
    match array.cast_into::<PyArray1<f64>>() {
        Ok(array) => Ok(Row(array.readonly())),
        Err(_) => Err(PyValueError::new_err(format!("vector: expected one dimension, got {got}"))),
    }
}

/// Rows of numbers, borrowed from an array for the length of a call.
pub(super) struct Block<'py>(PyReadonlyArray2<'py, f64>);

/// Entries worked on before the interpreter is asked for signals again: some milliseconds of work.
const PIECE: usize = 1 << 18;

impl Block<'_> {
    /// Its entries, row after row, and how many rows of `dim` they make.
    pub fn of(&self, dim: usize) -> PyResult<(&[f64], usize)> {
        let (count, width) = self.0.as_array().dim();
        if width != dim {
            return Err(PyValueError::new_err(format!("rows: expected {dim} columns, got {width}")));
        }
        match self.0.as_slice() {
            Ok(entries) => Ok((entries, count)),
            Err(_) => Err(PyValueError::new_err("rows: not contiguous")),
        }
    }

    /// The entries in pieces of whole rows, short enough to look for signals between them.
    /// Each comes with the index of its first row.
    pub fn pieces<'a>(&self, entries: &'a [f64]) -> impl Iterator<Item = (usize, &'a [f64])> + use<'a> {
        let width = self.0.as_array().dim().1.max(1);
        let rows = (PIECE / width).next_multiple_of(crate::basis::BLOCK_ROWS).max(crate::basis::BLOCK_ROWS);
        entries.chunks(rows * width).enumerate().map(move |(index, piece)| (index * rows, piece))
    }
}

/// Reads `object` as rows of numbers.
pub(super) fn block<'py>(object: &Bound<'py, PyAny>) -> PyResult<Block<'py>> {
    if object.is_exact_instance_of::<PyUntypedArray>()
        && let Ok(array) = object.cast::<PyArray2<f64>>()
        && array.is_c_contiguous()
        && array.is_aligned()
    {
        return Ok(Block(array.readonly()));
    }
    let array = as_float64(object)?;
    let got = dimensions(&array)?;
    match array.cast_into::<PyArray2<f64>>() {
        Ok(array) => Ok(Block(array.readonly())),
        Err(_) => Err(PyValueError::new_err(format!("rows: expected two dimensions, got {got}"))),
    }
}

fn dimensions(array: &Bound<'_, PyAny>) -> PyResult<usize> {
    array.getattr("ndim")?.extract()
}

/// A contiguous `float64` copy of anything NumPy reads as real numbers; a mask becomes NaN.
fn as_float64<'py>(object: &Bound<'py, PyAny>) -> PyResult<Bound<'py, PyAny>> {
    static NUMPY: PyOnceLock<Py<PyModule>> = PyOnceLock::new();
    let py = object.py();
    let numpy = NUMPY.get_or_try_init(py, || py.import("numpy").map(Bound::unbind))?.bind(py);
    let array = numpy.call_method1("asanyarray", (object,))?;
    let kind = array.getattr("dtype")?.getattr("kind")?;
    let kind = kind.cast::<PyString>()?.to_str()?;
    if !matches!(kind, "f" | "i" | "u" | "b") {
        let dtype = array.getattr("dtype")?.str()?;
        return Err(PyTypeError::new_err(format!("expected real numbers, got an array of {dtype}")));
    }
    // A single number keeps its no dimensions here, which `ascontiguousarray` would make one.
    let array = array.call_method1("astype", ("float64", "C"))?;
    if array.hasattr("mask")? { array.call_method1("filled", (f64::NAN,)) } else { Ok(array) }
}

/// Rows as a new array of their own type.
pub(super) fn array_of_rows<'py, T: Scalar + numpy::Element>(
    py: Python<'py>,
    rows: Rows<'_, T>,
) -> PyResult<Array2<'py, T>> {
    let entries: Vec<T> = rows.iter().flatten().copied().collect();
    PyArray1::from_vec(py, entries).reshape([rows.count(), rows.dim()])
}

/// Row-major entries as a new two-dimensional array.
pub(super) fn matrix(
    py: Python<'_>,
    entries: Vec<f64>,
    rows: usize,
    cols: usize,
) -> PyResult<Array2<'_, f64>> {
    PyArray1::from_vec(py, entries).reshape([rows, cols])
}

/// The stored type an argument names.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Stored {
    Float64,
    Float32,
}

impl<'py> FromPyObject<'_, 'py> for Stored {
    type Error = PyErr;

    /// Reads a `dtype` argument: a name, or anything NumPy takes for one.
    fn extract(object: Borrowed<'_, 'py, PyAny>) -> PyResult<Self> {
        let refused = || -> PyResult<PyErr> {
            let got = object.str()?;
            Ok(PyTypeError::new_err(format!("expected float64 or float32, got {got}")))
        };
        let Ok(dtype) = object.py().import("numpy")?.call_method1("dtype", (object,)) else {
            return Err(refused()?);
        };
        match dtype.getattr("name")?.str()?.to_str()? {
            "float64" if !object.is_none() => Ok(Self::Float64),
            "float32" => Ok(Self::Float32),
            _ => Err(refused()?),
        }
    }
}

/// A count or an index: a whole number, 0 or more.
#[derive(Clone, Copy, Debug)]
pub(super) struct Count(pub usize);

impl<'py> FromPyObject<'_, 'py> for Count {
    type Error = PyErr;

    fn extract(object: Borrowed<'_, 'py, PyAny>) -> PyResult<Self> {
        match object.extract::<usize>() {
            Ok(count) => Ok(Self(count)),
            Err(error) if error.is_instance_of::<PyOverflowError>(object.py()) => Err(PyValueError::new_err(
                format!("expected a whole number, 0 or more, got {}", object.str()?),
            )),
            Err(_) => {
                let got = object.repr()?;
                Err(PyTypeError::new_err(format!("expected a whole number, 0 or more, got {got}")))
            }
        }
    }
}
