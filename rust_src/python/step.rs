//! `perpend.Step`.

use numpy::PyArray1;
use pyo3::prelude::*;

use crate::basis;

#[doc = stub_doc!("Step")]
#[pyclass(frozen, module = "perpend")]
pub(super) struct Step {
    step: basis::Step,
    coefficients: Vec<f64>,
}

impl Step {
    pub fn new(step: basis::Step, coefficients: &[f64]) -> Self {
        Self { step, coefficients: coefficients.to_vec() }
    }
}

#[pymethods]
impl Step {
    #[getter]
    fn accepted(&self) -> bool {
        self.step.accepted()
    }

    #[getter]
    fn reason(&self) -> Option<&'static str> {
        self.step.reason.map(basis::Reason::name)
    }

    #[getter]
    fn rank(&self) -> usize {
        self.step.rank
    }

    #[getter]
    fn coefficients<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        PyArray1::from_slice(py, &self.coefficients)
    }

    #[getter]
    fn norm(&self) -> f64 {
        self.step.norm
    }

    #[getter]
    fn residual_norm(&self) -> f64 {
        self.step.residual_norm
    }

    #[getter]
    fn threshold(&self) -> f64 {
        self.step.threshold
    }

    #[getter]
    fn passes(&self) -> u32 {
        self.step.passes
    }

    #[getter]
    fn loss(&self) -> f64 {
        self.step.loss
    }

    fn __repr__(&self) -> String {
        let outcome = self.step.reason.map_or("accepted", basis::Reason::name);
        format!(
            "Step({outcome}, rank={}, residual_norm={:.6e}, threshold={:.3e}, passes={}, loss={:.2e})",
            self.step.rank, self.step.residual_norm, self.step.threshold, self.step.passes, self.step.loss
        )
    }
}
