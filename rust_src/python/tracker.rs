//! `perpend.Tracker`.

use numpy::PyArray1;
use pyo3::prelude::*;
use pyo3::types::{PyBytes, PyType};

use super::convert::{Array1, Count, Stored, array_of_rows, block, row};
use super::errors::fenced;
use super::guarded::Guarded;
use super::state::{self, kept};
use crate::Error;
use crate::tracker::{Settings, Tracker};

/// A tracker in one of the stored types.
#[derive(Clone)]
enum Inner {
    Float64(Tracker<f64>),
    Float32(Tracker<f32>),
}

/// Does the same with a tracker of either type.
macro_rules! either {
    ($inner:expr, $tracker:ident => $body:expr) => {
        match $inner {
            Inner::Float64($tracker) => $body,
            Inner::Float32($tracker) => $body,
        }
    };
}

kept!(Inner);

#[doc = stub_doc!("Tracker")]
#[pyclass(frozen, module = "perpend", name = "Tracker")]
pub(super) struct PyTracker {
    inner: Guarded<Inner>,
    settings: Settings,
}

/// A row split against the model: coefficients and residual.
struct Parts {
    coefficients: Vec<f64>,
    residual: Vec<f64>,
    norm: f64,
}

impl PyTracker {
    fn around(inner: Inner) -> Self {
        let settings = either!(&inner, tracker => *tracker.settings());
        Self { inner: Guarded::new(inner), settings }
    }

    /// Splits a row, with fresh room for the answer.
    fn parts(&self, object: &Bound<'_, PyAny>) -> PyResult<Parts> {
        let row = row(object)?;
        let entries = row.entries()?;
        let mut coefficients = vec![0.0; self.settings.rank];
        let mut residual = vec![0.0; self.settings.channels];
        let split = self.inner.with(object.py(), |inner| {
            either!(inner, tracker => {
                let split = tracker.split_into(entries, &mut coefficients, &mut residual)?;
                coefficients.truncate(tracker.rank());
                Ok(split)
            })
        })?;
        Ok(Parts { coefficients, residual, norm: split.residual_norm_squared.sqrt() })
    }

    /// Reads something that follows from the axes as they are now.
    fn current<R>(&self, py: Python<'_>, read: impl FnOnce(&Inner) -> R) -> PyResult<R> {
        self.inner.with(py, |inner| {
            either!(inner, tracker => tracker.refresh())?;
            Ok(read(inner))
        })
    }
}

#[pymethods]
impl PyTracker {
    #[new]
    #[pyo3(
        signature = (channels, rank, *, memory=None, center=true, guard=None, share=None, dtype=Stored::Float64),
        text_signature =
            "(channels, rank, *, memory=None, center=True, guard=None, share=None, dtype='float64')"
    )]
    fn new(
        channels: Count,
        rank: Count,
        memory: Option<f64>,
        center: bool,
        guard: Option<Count>,
        share: Option<f64>,
        dtype: Stored,
    ) -> PyResult<Self> {
        let guard = guard.map(|guard| guard.0);
        let settings = Settings { channels: channels.0, rank: rank.0, memory, center, guard };
        let inner = fenced(|| {
            let mut inner = match dtype {
                Stored::Float64 => Inner::Float64(Tracker::new(settings)?),
                Stored::Float32 => Inner::Float32(Tracker::new(settings)?),
            };
            if let Some(share) = share {
                either!(&mut inner, tracker => tracker.follow_share(share))?;
            }
            Ok(inner)
        })?;
        Ok(Self::around(inner))
    }

    #[doc = stub_doc!("Tracker.update")]
    #[pyo3(signature = (row, weight=1.0, *, elapsed=1.0))]
    fn update(&self, row: &Bound<'_, PyAny>, weight: f64, elapsed: f64) -> PyResult<bool> {
        let row = super::convert::row(row)?;
        let entries = row.entries()?;
        self.inner.with(row.py(), |inner| {
            Ok(either!(inner, tracker => tracker.update_after(entries, weight, elapsed))?.learned())
        })
    }

    #[doc = stub_doc!("Tracker.update_rows")]
    fn update_rows(&self, rows: &Bound<'_, PyAny>) -> PyResult<()> {
        let py = rows.py();
        let block = block(rows)?;
        let (entries, _) = block.of(self.settings.channels)?;
        self.inner.with(py, |inner| either!(inner, tracker => tracker.check_rows(entries)))?;
        self.inner.in_pieces(
            py,
            block.pieces(entries),
            |inner, piece| either!(inner, tracker => tracker.update_rows(piece)),
        )
    }

    #[doc = stub_doc!("Tracker.split")]
    fn split<'py>(&self, row: &Bound<'py, PyAny>) -> PyResult<(Array1<'py, f64>, Array1<'py, f64>)> {
        let py = row.py();
        let parts = self.parts(row)?;
        Ok((PyArray1::from_vec(py, parts.coefficients), PyArray1::from_vec(py, parts.residual)))
    }

    #[doc = stub_doc!("Tracker.residual_norm")]
    fn residual_norm(&self, row: &Bound<'_, PyAny>) -> PyResult<f64> {
        Ok(self.parts(row)?.norm)
    }

    #[doc = stub_doc!("Tracker.reconstruct")]
    fn reconstruct<'py>(&self, row: &Bound<'py, PyAny>) -> PyResult<Array1<'py, f64>> {
        let py = row.py();
        let row = super::convert::row(row)?;
        let entries = row.entries()?;
        let mut value = vec![0.0; self.settings.channels];
        self.inner
            .with(py, |inner| either!(inner, tracker => tracker.reconstruct_into(entries, &mut value)))?;
        Ok(PyArray1::from_vec(py, value))
    }

    #[doc = stub_doc!("Tracker.angles")]
    fn angles<'py>(&self, other: &Bound<'py, Self>) -> PyResult<Array1<'py, f64>> {
        let py = other.py();
        // A copy of the other, so that two locks are never held together.
        let mut other = other.get().inner.read(py, Inner::clone);
        let angles =
            self.inner.with(py, |inner| either!(inner, a => either!(&mut other, b => a.angles(b))))?;
        Ok(PyArray1::from_vec(py, angles))
    }

    #[doc = stub_doc!("Tracker.certificate")]
    fn certificate<'py>(&self, py: Python<'py>) -> PyResult<(Array1<'py, f64>, Option<f64>)> {
        let (energies, angle) = self.inner.with(py, |inner| {
            either!(inner, tracker => {
                let certificate = tracker.certificate()?;
                let upper: Vec<f64> =
                    tracker.energies().iter().map(|energy| energy + certificate.lost).collect();
                Ok((upper, certificate.sine.map(f64::asin)))
            })
        })?;
        Ok((PyArray1::from_vec(py, energies), angle))
    }

    #[doc = stub_doc!("Tracker.merge")]
    fn merge(&self, other: &Bound<'_, Self>) -> PyResult<()> {
        let py = other.py();
        let other = other.get().inner.read(py, Inner::clone);
        self.inner.with(py, |inner| match (inner, &other) {
            (Inner::Float64(mine), Inner::Float64(theirs)) => mine.merge(theirs),
            (Inner::Float32(mine), Inner::Float32(theirs)) => mine.merge(theirs),
            (Inner::Float64(_), _) => {
                Err(Error::Unlike { what: "dtype", expected: "float64".into(), got: "float32".into() })
            }
            (Inner::Float32(_), _) => {
                Err(Error::Unlike { what: "dtype", expected: "float32".into(), got: "float64".into() })
            }
        })
    }

    #[doc = stub_doc!("Tracker.orthogonality_error")]
    fn orthogonality_error(&self, py: Python<'_>) -> PyResult<f64> {
        self.inner.with(py, |inner| either!(inner, tracker => tracker.orthogonality_error()))
    }

    #[doc = stub_doc!("Tracker.copy")]
    fn copy(&self, py: Python<'_>) -> Self {
        Self::around(self.inner.read(py, Inner::clone))
    }

    fn __copy__(&self, py: Python<'_>) -> Self {
        self.copy(py)
    }

    fn __deepcopy__(&self, py: Python<'_>, _memo: &Bound<'_, PyAny>) -> Self {
        self.copy(py)
    }

    #[doc = stub_doc!("Tracker.to_bytes")]
    fn to_bytes<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyBytes>> {
        Ok(PyBytes::new(py, &state::to_bytes(py, &self.inner)?))
    }

    #[doc = stub_doc!("Tracker.from_bytes")]
    #[classmethod]
    fn from_bytes(_class: &Bound<'_, PyType>, data: &Bound<'_, PyAny>) -> PyResult<Self> {
        Ok(Self::around(state::from_bytes(data)?))
    }

    #[doc = stub_doc!("Tracker.save")]
    fn save(&self, path: &Bound<'_, PyAny>) -> PyResult<()> {
        state::save(&self.inner, path)
    }

    #[doc = stub_doc!("Tracker.load")]
    #[classmethod]
    fn load(_class: &Bound<'_, PyType>, path: &Bound<'_, PyAny>) -> PyResult<Self> {
        Ok(Self::around(state::load(path)?))
    }

    fn __reduce__<'py>(slf: &Bound<'py, Self>) -> PyResult<(Bound<'py, PyAny>, (Bound<'py, PyBytes>,))> {
        Ok((slf.get_type().getattr("from_bytes")?, (slf.get().to_bytes(slf.py())?,)))
    }

    #[doc = stub_doc!("Tracker.axes")]
    #[getter]
    fn axes<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyAny>> {
        self.current(
            py,
            |inner| either!(inner, tracker => Ok(array_of_rows(py, tracker.axes())?.into_any())),
        )?
    }

    #[doc = stub_doc!("Tracker.energies")]
    #[getter]
    fn energies<'py>(&self, py: Python<'py>) -> PyResult<Array1<'py, f64>> {
        self.current(py, |inner| either!(inner, tracker => PyArray1::from_slice(py, tracker.energies())))
    }

    #[doc = stub_doc!("Tracker.mean")]
    #[getter]
    fn mean<'py>(&self, py: Python<'py>) -> Array1<'py, f64> {
        self.inner.read(py, |inner| either!(inner, tracker => PyArray1::from_slice(py, tracker.mean())))
    }

    #[doc = stub_doc!("Tracker.noise_energy")]
    #[getter]
    fn noise_energy(&self, py: Python<'_>) -> PyResult<f64> {
        self.current(py, |inner| either!(inner, tracker => tracker.noise_energy()))
    }

    #[doc = stub_doc!("Tracker.explained")]
    #[getter]
    fn explained(&self, py: Python<'_>) -> PyResult<f64> {
        self.current(py, |inner| either!(inner, tracker => tracker.explained()))
    }

    #[doc = stub_doc!("Tracker.gap")]
    #[getter]
    fn gap(&self, py: Python<'_>) -> PyResult<f64> {
        self.current(py, |inner| either!(inner, tracker => tracker.gap()))
    }

    #[doc = stub_doc!("Tracker.samples")]
    #[getter]
    fn samples(&self, py: Python<'_>) -> u64 {
        self.inner.read(py, |inner| either!(inner, tracker => tracker.samples()))
    }

    #[doc = stub_doc!("Tracker.skipped")]
    #[getter]
    fn skipped(&self, py: Python<'_>) -> u64 {
        self.inner.read(py, |inner| either!(inner, tracker => tracker.skipped()))
    }

    #[doc = stub_doc!("Tracker.total_weight")]
    #[getter]
    fn total_weight(&self, py: Python<'_>) -> f64 {
        self.inner.read(py, |inner| either!(inner, tracker => tracker.total_weight()))
    }

    #[doc = stub_doc!("Tracker.channels")]
    #[getter]
    fn channels(&self) -> usize {
        self.settings.channels
    }

    #[doc = stub_doc!("Tracker.rank")]
    #[getter]
    fn rank(&self, py: Python<'_>) -> PyResult<usize> {
        self.current(py, |inner| either!(inner, tracker => tracker.rank()))
    }

    #[doc = stub_doc!("Tracker.guard")]
    #[getter]
    fn guard(&self, py: Python<'_>) -> PyResult<usize> {
        Ok(self.settings.directions() - self.rank(py)?)
    }

    #[doc = stub_doc!("Tracker.share")]
    #[getter]
    fn share(&self, py: Python<'_>) -> Option<f64> {
        self.inner.read(py, |inner| either!(inner, tracker => tracker.share()))
    }

    #[doc = stub_doc!("Tracker.memory")]
    #[getter]
    fn memory(&self) -> Option<f64> {
        self.settings.memory
    }

    fn __repr__(&self, py: Python<'_>) -> String {
        let Settings { channels, rank, .. } = self.settings;
        let guard = self.settings.directions() - rank;
        let share = self.share(py).map_or_else(String::new, |share| format!(", share={share}"));
        format!(
            "Tracker(channels={channels}, rank={rank}, guard={guard}{share}, samples={})",
            self.samples(py)
        )
    }
}
