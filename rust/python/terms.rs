//! `trueturn._native.Terms`: the algebra behind `trueturn.Operator`.

use std::sync::Arc;

use numpy::{PyArray1, PyArrayMethods, PyReadonlyArray1};
use pyo3::prelude::*;

use super::error::to_python;
use super::gateway::run_checked;
use crate::error::Error;
use crate::pauli::PauliString;
use crate::terms::{Limits, Terms, commuting_groups, parse_factors};

/// A real sum of distinct Pauli strings; masks cross the boundary as Python integers.
#[pyclass(frozen, name = "Terms", module = "trueturn._native")]
pub struct PyTerms {
    /// The terms themselves, shared without copying.
    pub terms: Arc<Terms>,
}

impl From<Terms> for PyTerms {
    fn from(terms: Terms) -> Self {
        Self { terms: Arc::new(terms) }
    }
}

#[pymethods]
impl PyTerms {
    #[staticmethod]
    #[pyo3(signature = (x, z, coefficients, qubits))]
    fn from_masks(
        py: Python<'_>,
        x: Vec<u128>,
        z: Vec<u128>,
        coefficients: PyReadonlyArray1<'_, f64>,
        qubits: Option<u32>,
    ) -> PyResult<Self> {
        let coefficients = coefficients.to_vec()?;
        run_checked(py, |_| {
            if x.len() != z.len() || x.len() != coefficients.len() {
                let message = format!(
                    "coefficients: lengths differ ({} x masks, {} z masks, {} coefficients); give one of each per term",
                    x.len(),
                    z.len(),
                    coefficients.len()
                );
                return Err(Error::Operator { argument: "coefficients", message });
            }
            let strings = x.iter().zip(&z).map(|(&x, &z)| PauliString { x, z });
            Terms::new(qubits, strings.zip(coefficients)).map(Self::from)
        })
    }

    #[staticmethod]
    #[pyo3(signature = (text, qubits))]
    fn parse(py: Python<'_>, text: &str, qubits: Option<u32>) -> PyResult<Self> {
        run_checked(py, |_| Terms::parse(text, qubits).map(Self::from))
    }

    /// The x mask, the z mask and the sign of factors such as `X_0 Z_3`.
    #[staticmethod]
    #[pyo3(signature = (text, qubits))]
    fn parse_factors(py: Python<'_>, text: &str, qubits: Option<u32>) -> PyResult<(u128, u128, f64)> {
        let (string, sign) = parse_factors(text, qubits).map_err(|error| to_python(py, error))?;
        Ok((string.x, string.z, sign))
    }

    #[getter]
    fn qubits(&self) -> u32 {
        self.terms.qubits()
    }

    fn __len__(&self) -> usize {
        self.terms.len()
    }

    fn text(&self, py: Python<'_>) -> String {
        py.detach(|| self.terms.to_string())
    }

    fn coefficients<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        PyArray1::from_slice(py, self.terms.coefficients())
    }

    fn x_masks(&self) -> Vec<u128> {
        self.terms.strings().iter().map(|string| string.x).collect()
    }

    fn z_masks(&self) -> Vec<u128> {
        self.terms.strings().iter().map(|string| string.z).collect()
    }

    fn same_as(&self, py: Python<'_>, other: &Self) -> bool {
        py.detach(|| self.terms.same_as(&other.terms))
    }

    fn plus(&self, py: Python<'_>, other: &Self) -> PyResult<Self> {
        run_checked(py, |_| self.terms.plus(&other.terms).map(Self::from))
    }

    fn minus(&self, py: Python<'_>, other: &Self) -> PyResult<Self> {
        run_checked(py, |_| self.terms.minus(&other.terms).map(Self::from))
    }

    fn scaled(&self, py: Python<'_>, factor: f64) -> PyResult<Self> {
        run_checked(py, |_| self.terms.scaled(factor).map(Self::from))
    }

    fn divided(&self, py: Python<'_>, divisor: f64) -> PyResult<Self> {
        run_checked(py, |_| self.terms.divided(divisor).map(Self::from))
    }

    fn times(&self, py: Python<'_>, other: &Self, memory: u64) -> PyResult<Self> {
        run_checked(py, |check| self.terms.times(&other.terms, &mut Limits { memory, check }).map(Self::from))
    }

    fn bracket(&self, py: Python<'_>, other: &Self, memory: u64) -> PyResult<Self> {
        run_checked(py, |check| self.terms.bracket(&other.terms, &mut Limits { memory, check }).map(Self::from))
    }

    fn bracket_vanishes(&self, py: Python<'_>, other: &Self, memory: u64) -> PyResult<bool> {
        run_checked(py, |check| self.terms.bracket_vanishes(&other.terms, &mut Limits { memory, check }))
    }

    /// Numbers of the first two terms that do not commute.
    fn first_anticommuting_pair(&self, py: Python<'_>) -> PyResult<Option<(usize, usize)>> {
        run_checked(py, |check| self.terms.first_anticommuting_pair(check))
    }

    /// The number of the greedy commuting group of each term.
    fn commuting_groups<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyArray1<i64>>> {
        let groups = run_checked(py, |check| commuting_groups(self.terms.strings(), check))?;
        Ok(PyArray1::from_iter(py, groups.into_iter().map(|group| group as i64)))
    }

    /// A bound on the spectral norm from groups of anticommuting strings, and the number of groups.
    fn anticommuting_norm(&self, py: Python<'_>) -> PyResult<(f64, usize)> {
        run_checked(py, |check| self.terms.anticommuting_norm(check))
    }

    fn relabelled(&self, py: Python<'_>, new_names: Vec<u32>) -> PyResult<Self> {
        run_checked(py, |_| self.terms.relabelled(&new_names).map(Self::from))
    }
}
