//! `perpend.Reading`.

use std::sync::Arc;

use numpy::PyArray1;
use pyo3::prelude::*;
use pyo3::types::PyTuple;

use super::convert::Count;
use crate::watch::{Condition, LIMITS, Reading, suspects};

#[doc = stub_doc!("Reading")]
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
    #[doc = stub_doc!("Reading.tick")]
    #[getter]
    fn tick(&self) -> u64 {
        self.reading.tick
    }

    #[doc = stub_doc!("Reading.phase")]
    #[getter]
    fn phase(&self) -> &'static str {
        self.reading.phase.name()
    }

    #[doc = stub_doc!("Reading.alarm")]
    #[getter]
    fn alarm(&self) -> bool {
        self.reading.alarm
    }

    #[doc = stub_doc!("Reading.spe")]
    #[getter]
    fn spe(&self) -> f64 {
        self.reading.spe
    }

    #[doc = stub_doc!("Reading.spe_limit")]
    #[getter]
    fn spe_limit(&self) -> f64 {
        self.reading.spe_limit
    }

    #[doc = stub_doc!("Reading.t2")]
    #[getter]
    fn t2(&self) -> f64 {
        self.reading.t2
    }

    #[doc = stub_doc!("Reading.t2_limit")]
    #[getter]
    fn t2_limit(&self) -> f64 {
        self.reading.t2_limit
    }

    #[doc = stub_doc!("Reading.spe_smooth")]
    #[getter]
    fn spe_smooth(&self) -> f64 {
        self.reading.spe_smooth
    }

    #[doc = stub_doc!("Reading.spe_smooth_limit")]
    #[getter]
    fn spe_smooth_limit(&self) -> f64 {
        self.reading.spe_smooth_limit
    }

    #[doc = stub_doc!("Reading.t2_smooth")]
    #[getter]
    fn t2_smooth(&self) -> f64 {
        self.reading.t2_smooth
    }

    #[doc = stub_doc!("Reading.t2_smooth_limit")]
    #[getter]
    fn t2_smooth_limit(&self) -> f64 {
        self.reading.t2_smooth_limit
    }

    #[doc = stub_doc!("Reading.exceeds")]
    #[getter]
    fn exceeds<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyTuple>> {
        passed(py, self.reading.exceeds)
    }

    #[doc = stub_doc!("Reading.widening")]
    #[getter]
    fn widening(&self) -> f64 {
        self.reading.widening
    }

    #[doc = stub_doc!("Reading.weight")]
    #[getter]
    fn weight(&self) -> f64 {
        self.reading.weight
    }

    #[doc = stub_doc!("Reading.rank")]
    #[getter]
    fn rank(&self) -> usize {
        self.reading.rank
    }

    #[doc = stub_doc!("Reading.drift")]
    #[getter]
    fn drift(&self) -> Option<f64> {
        self.reading.drift.angle
    }

    #[doc = stub_doc!("Reading.captured")]
    #[getter]
    fn captured(&self) -> Option<f64> {
        self.reading.drift.captured
    }

    #[doc = stub_doc!("Reading.mean_shift")]
    #[getter]
    fn mean_shift(&self) -> Option<f64> {
        self.reading.drift.mean_shift
    }

    #[doc = stub_doc!("Reading.missing")]
    #[getter]
    fn missing(&self) -> Vec<&str> {
        self.named(|condition| condition.missing)
    }

    #[doc = stub_doc!("Reading.stuck")]
    #[getter]
    fn stuck(&self) -> Vec<&str> {
        self.named(|condition| condition.stuck)
    }

    #[doc = stub_doc!("Reading.vanished")]
    #[getter]
    fn vanished(&self) -> Vec<&str> {
        self.named(|condition| condition.vanished)
    }

    #[doc = stub_doc!("Reading.contributions")]
    fn contributions<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        PyArray1::from_slice(py, &self.reading.contributions)
    }

    #[doc = stub_doc!("Reading.expected")]
    fn expected<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        PyArray1::from_slice(py, &self.reading.expected)
    }

    #[doc = stub_doc!("Reading.corrected")]
    fn corrected<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        PyArray1::from_slice(py, &self.reading.corrected)
    }

    #[doc = stub_doc!("Reading.suspects")]
    #[pyo3(signature = (n=Count(3)), text_signature = "($self, n=3)")]
    fn suspects(&self, n: Count) -> Vec<(&str, f64)> {
        let foremost = suspects::foremost(&self.reading.shares, n.0);
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
