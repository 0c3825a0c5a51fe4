//! `perpend.Reading`.

use std::sync::Arc;

use numpy::PyArray1;
use pyo3::prelude::*;
use pyo3::types::PyTuple;

use crate::watch::{Condition, LIMITS, Reading, suspects};

/// What one tick found; see `_core.pyi` for the documentation.
#[pyclass(frozen, module = "perpend", name = "Reading")]
pub(super) struct PyReading {
    reading: Reading,
    names: Arc<Vec<String>>,
}

impl PyReading {
    pub fn new(reading: Reading, names: Arc<Vec<String>>) -> Self {
        Self { reading, names }
    }

    fn named(&self, is: impl Fn(&Condition) -> bool) -> Vec<&str> {
        let pairs = self.reading.conditions.iter().zip(self.names.iter());
        pairs.filter(|(condition, _)| is(condition)).map(|(_, name)| name.as_str()).collect()
    }
}

/// Names of the limits passed.
pub(super) fn passed(py: Python<'_>, exceeds: [bool; 4]) -> PyResult<Bound<'_, PyTuple>> {
    let passed: Vec<&str> =
        LIMITS.iter().zip(exceeds).filter(|(_, exceeds)| *exceeds).map(|(name, _)| *name).collect();
    PyTuple::new(py, passed)
}

#[pymethods]
impl PyReading {
    #[getter]
    fn tick(&self) -> u64 {
        self.reading.tick
    }

    #[getter]
    fn phase(&self) -> &'static str {
        self.reading.phase.name()
    }

    #[getter]
    fn alarm(&self) -> bool {
        self.reading.alarm
    }

    #[getter]
    fn spe(&self) -> f64 {
        self.reading.spe
    }

    #[getter]
    fn spe_limit(&self) -> f64 {
        self.reading.spe_limit
    }

    #[getter]
    fn t2(&self) -> f64 {
        self.reading.t2
    }

    #[getter]
    fn t2_limit(&self) -> f64 {
        self.reading.t2_limit
    }

    #[getter]
    fn spe_smooth(&self) -> f64 {
        self.reading.spe_smooth
    }

    #[getter]
    fn spe_smooth_limit(&self) -> f64 {
        self.reading.spe_smooth_limit
    }

    #[getter]
    fn t2_smooth(&self) -> f64 {
        self.reading.t2_smooth
    }

    #[getter]
    fn t2_smooth_limit(&self) -> f64 {
        self.reading.t2_smooth_limit
    }

    #[getter]
    fn exceeds<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyTuple>> {
        passed(py, self.reading.exceeds)
    }

    #[getter]
    fn widening(&self) -> f64 {
        self.reading.widening
    }

    #[getter]
    fn weight(&self) -> f64 {
        self.reading.weight
    }

    #[getter]
    fn rank(&self) -> usize {
        self.reading.rank
    }

    #[getter]
    fn drift(&self) -> Option<f64> {
        self.reading.drift.angle
    }

    #[getter]
    fn captured(&self) -> Option<f64> {
        self.reading.drift.captured
    }

    #[getter]
    fn mean_shift(&self) -> Option<f64> {
        self.reading.drift.mean_shift
    }

    #[getter]
    fn missing(&self) -> Vec<&str> {
        self.named(|condition| condition.missing)
    }

    #[getter]
    fn stuck(&self) -> Vec<&str> {
        self.named(|condition| condition.stuck)
    }

    #[getter]
    fn vanished(&self) -> Vec<&str> {
        self.named(|condition| condition.vanished)
    }

    fn contributions<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        PyArray1::from_slice(py, &self.reading.contributions)
    }

    #[pyo3(signature = (n=3))]
    fn suspects(&self, n: usize) -> Vec<(&str, f64)> {
        let foremost = suspects::foremost(&self.reading.shares, n);
        foremost.into_iter().map(|(channel, share)| (self.names[channel].as_str(), share)).collect()
    }

    fn __repr__(&self) -> String {
        let reading = &self.reading;
        format!(
            "Reading(tick={}, phase={}, alarm={}, spe={:.3} of {:.3}, t2={:.3} of {:.3})",
            reading.tick,
            reading.phase.name(),
            if reading.alarm { "True" } else { "False" },
            reading.spe,
            reading.spe_limit,
            reading.t2,
            reading.t2_limit
        )
    }
}
