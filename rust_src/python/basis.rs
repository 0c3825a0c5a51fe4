//! `perpend.Basis`.

use numpy::PyArray1;
use pyo3::exceptions::PyTypeError;
use pyo3::prelude::*;
use pyo3::types::{PyBytes, PyType};

use super::convert::{Array1, Array2, Count, Stored, array_of_rows, block, matrix, row};
use super::errors::fenced;
use super::guarded::Guarded;
use super::state::{self, kept};
use super::step::Step;
use crate::basis::{Basis, Tolerance};
use crate::{Error, Scalar};

/// A basis in one of the stored types.
#[derive(Clone)]
enum Inner {
    Float64(Basis<f64>),
    Float32(Basis<f32>),
}

/// Does the same with a basis of either type.
macro_rules! either {
    ($inner:expr, $basis:ident => $body:expr) => {
        match $inner {
            Inner::Float64($basis) => $body,
            Inner::Float32($basis) => $body,
        }
    };
}

kept!(Inner);

#[doc = stub_doc!("Basis")]
#[pyclass(frozen, module = "perpend", name = "Basis")]
pub(super) struct PyBasis {
    inner: Guarded<Inner>,
}

/// The tolerance argument: a relative one, or a pair of a relative and an absolute one.
struct ToleranceArgument(Tolerance);

impl<'py> FromPyObject<'_, 'py> for ToleranceArgument {
    type Error = PyErr;

    fn extract(object: Borrowed<'_, 'py, PyAny>) -> PyResult<Self> {
        if let Ok(relative) = object.extract::<f64>() {
            return Ok(Self(Tolerance { relative, absolute: 0.0 }));
        }
        match object.extract::<(f64, f64)>() {
            Ok((relative, absolute)) => Ok(Self(Tolerance { relative, absolute })),
            Err(_) => Err(PyTypeError::new_err(format!(
                "tolerance: expected a number, or a pair of a relative and an absolute one, got {}",
                object.repr()?
            ))),
        }
    }
}

/// Makes a basis of one type.
fn make<T: Scalar>(dim: usize, capacity: Option<usize>, tolerance: Option<Tolerance>) -> PyResult<Basis<T>> {
    fenced(|| Basis::new(dim, capacity, tolerance))
}

impl PyBasis {
    fn around(inner: Inner) -> Self {
        Self { inner: Guarded::new(inner) }
    }
}

#[pymethods]
impl PyBasis {
    #[new]
    #[pyo3(
        signature = (dim, capacity=None, *, dtype=Stored::Float64, tolerance=None),
        text_signature = "(dim, capacity=None, *, dtype='float64', tolerance=None)"
    )]
    fn new(
        dim: Count,
        capacity: Option<Count>,
        dtype: Stored,
        tolerance: Option<ToleranceArgument>,
    ) -> PyResult<Self> {
        let (dim, capacity) = (dim.0, capacity.map(|capacity| capacity.0));
        let tolerance = tolerance.map(|argument| argument.0);
        let inner = match dtype {
            Stored::Float64 => Inner::Float64(make(dim, capacity, tolerance)?),
            Stored::Float32 => Inner::Float32(make(dim, capacity, tolerance)?),
        };
        Ok(Self::around(inner))
    }

    #[doc = stub_doc!("Basis.add")]
    fn add(&self, vector: &Bound<'_, PyAny>) -> PyResult<Step> {
        let vector = row(vector)?;
        let entries = vector.entries()?;
        self.inner.with(vector.py(), |inner| {
            either!(inner, basis => {
                let step = basis.add(entries)?;
                Ok(Step::new(step, &basis.coefficients()[..step.rank]))
            })
        })
    }

    #[doc = stub_doc!("Basis.split")]
    fn split<'py>(&self, vector: &Bound<'py, PyAny>) -> PyResult<(Array1<'py, f64>, Array1<'py, f64>)> {
        let vector = row(vector)?;
        let entries = vector.entries()?;
        let py = vector.py();
        self.inner.with(py, |inner| {
            either!(inner, basis => {
                basis.split(entries)?;
                let coefficients = PyArray1::from_slice(py, basis.coefficients());
                Ok((coefficients, PyArray1::from_slice(py, basis.residual())))
            })
        })
    }

    #[doc = stub_doc!("Basis.residual_norm")]
    fn residual_norm(&self, vector: &Bound<'_, PyAny>) -> PyResult<f64> {
        let vector = row(vector)?;
        let entries = vector.entries()?;
        self.inner.with(vector.py(), |inner| either!(inner, basis => Ok(basis.split(entries)?.residual_norm)))
    }

    #[doc = stub_doc!("Basis.add_rows")]
    fn add_rows<'py>(&self, rows: &Bound<'py, PyAny>) -> PyResult<(Array1<'py, bool>, Array1<'py, f64>)> {
        let py = rows.py();
        let block = block(rows)?;
        let (entries, count) = block.of(self.dim(py))?;
        self.inner.with(py, |inner| either!(inner, basis => basis.check_rows(entries)))?;
        let mut steps = Vec::with_capacity(count);
        self.inner.in_pieces(
            py,
            block.pieces(entries),
            |inner, piece| either!(inner, basis => basis.add_rows(piece, &mut steps)),
        )?;
        let accepted = steps.iter().map(crate::basis::Step::accepted).collect();
        let norms = steps.iter().map(|step| step.residual_norm).collect();
        Ok((PyArray1::from_vec(py, accepted), PyArray1::from_vec(py, norms)))
    }

    #[doc = stub_doc!("Basis.split_rows")]
    fn split_rows<'py>(&self, rows: &Bound<'py, PyAny>) -> PyResult<(Array2<'py, f64>, Array2<'py, f64>)> {
        let py = rows.py();
        let block = block(rows)?;
        let dim = self.dim(py);
        let (entries, count) = block.of(dim)?;
        let rank = self.rank(py);
        let mut coefficients = Vec::with_capacity(count * rank);
        let mut residuals = Vec::with_capacity(entries.len());
        self.inner.in_pieces(py, block.pieces(entries), |inner, piece| {
            either!(inner, basis => {
                if basis.rank() != rank {
                    // Another thread had its turn between two pieces.
                    let (expected, got) = (rank.to_string(), basis.rank().to_string());
                    return Err(Error::Unlike { what: "rank of the rows before", expected, got });
                }
                for (index, row) in piece.chunks_exact(dim).enumerate() {
                    basis.split(row).map_err(|error| error.in_row(index))?;
                    coefficients.extend_from_slice(basis.coefficients());
                    residuals.extend_from_slice(basis.residual());
                }
                Ok(())
            })
        })?;
        Ok((matrix(py, coefficients, count, rank)?, matrix(py, residuals, count, dim)?))
    }

    #[doc = stub_doc!("Basis.angles")]
    fn angles<'py>(&self, other: &Bound<'py, Self>) -> PyResult<Array1<'py, f64>> {
        let py = other.py();
        // A copy of the other, so that two locks are never held together.
        let other = other.get().inner.read(py, Inner::clone);
        let angles = self.inner.with(py, |inner| {
            either!(inner, a => either!(&other, b => crate::principal_angles(a.vectors(), b.vectors())))
        })?;
        Ok(PyArray1::from_vec(py, angles))
    }

    fn __copy__(&self, py: Python<'_>) -> Self {
        Self::around(self.inner.read(py, Inner::clone))
    }

    fn __deepcopy__(&self, py: Python<'_>, _memo: &Bound<'_, PyAny>) -> Self {
        self.__copy__(py)
    }

    #[doc = stub_doc!("Basis.copy")]
    fn copy(&self, py: Python<'_>) -> Self {
        self.__copy__(py)
    }

    #[doc = stub_doc!("Basis.to_bytes")]
    fn to_bytes<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyBytes>> {
        Ok(PyBytes::new(py, &state::to_bytes(py, &self.inner)?))
    }

    #[doc = stub_doc!("Basis.from_bytes")]
    #[classmethod]
    fn from_bytes(_class: &Bound<'_, PyType>, data: &Bound<'_, PyAny>) -> PyResult<Self> {
        Ok(Self::around(state::from_bytes(data)?))
    }

    #[doc = stub_doc!("Basis.save")]
    fn save(&self, path: &Bound<'_, PyAny>) -> PyResult<()> {
        state::save(&self.inner, path)
    }

    #[doc = stub_doc!("Basis.load")]
    #[classmethod]
    fn load(_class: &Bound<'_, PyType>, path: &Bound<'_, PyAny>) -> PyResult<Self> {
        Ok(Self::around(state::load(path)?))
    }

    fn __reduce__<'py>(slf: &Bound<'py, Self>) -> PyResult<(Bound<'py, PyAny>, (Bound<'py, PyBytes>,))> {
        Ok((slf.get_type().getattr("from_bytes")?, (slf.get().to_bytes(slf.py())?,)))
    }

    #[doc = stub_doc!("Basis.drop")]
    fn drop(&self, py: Python<'_>, index: Count) -> PyResult<()> {
        self.inner.with(py, |inner| either!(inner, basis => basis.drop(index.0)))
    }

    #[doc = stub_doc!("Basis.solve")]
    fn solve<'py>(&self, target: &Bound<'py, PyAny>) -> PyResult<(Array1<'py, f64>, f64)> {
        let target = row(target)?;
        let entries = target.entries()?;
        let py = target.py();
        self.inner.with(py, |inner| {
            let solution = either!(inner, basis => basis.solve(entries))?;
            Ok((PyArray1::from_vec(py, solution.weights), solution.residual_norm))
        })
    }

    #[doc = stub_doc!("Basis.condition")]
    fn condition(&self, py: Python<'_>) -> PyResult<f64> {
        self.inner.with(py, |inner| either!(inner, basis => basis.condition()))
    }

    #[doc = stub_doc!("Basis.orthogonality_error")]
    fn orthogonality_error(&self, py: Python<'_>) -> PyResult<f64> {
        self.inner.with(py, |inner| either!(inner, basis => basis.orthogonality_error()))
    }

    #[doc = stub_doc!("Basis.vectors")]
    #[getter]
    fn vectors<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyAny>> {
        self.inner
            .read(py, |inner| either!(inner, basis => Ok(array_of_rows(py, basis.vectors())?.into_any())))
    }

    #[doc = stub_doc!("Basis.triangular")]
    #[getter]
    fn triangular<'py>(&self, py: Python<'py>) -> PyResult<Array2<'py, f64>> {
        let (dense, rank) =
            self.inner.read(py, |inner| either!(inner, basis => (basis.triangular(), basis.rank())));
        matrix(py, dense, rank, rank)
    }

    #[doc = stub_doc!("Basis.rank")]
    #[getter]
    fn rank(&self, py: Python<'_>) -> usize {
        self.inner.read(py, |inner| either!(inner, basis => basis.rank()))
    }

    #[doc = stub_doc!("Basis.dim")]
    #[getter]
    fn dim(&self, py: Python<'_>) -> usize {
        self.inner.read(py, |inner| either!(inner, basis => basis.dim()))
    }

    #[doc = stub_doc!("Basis.capacity")]
    #[getter]
    fn capacity(&self, py: Python<'_>) -> usize {
        self.inner.read(py, |inner| either!(inner, basis => basis.capacity()))
    }

    fn __len__(&self, py: Python<'_>) -> usize {
        self.rank(py)
    }

    fn __repr__(&self, py: Python<'_>) -> String {
        self.inner.read(py, |inner| {
            either!(inner, basis => {
                format!("Basis(dim={}, capacity={}, rank={})", basis.dim(), basis.capacity(), basis.rank())
            })
        })
    }
}
