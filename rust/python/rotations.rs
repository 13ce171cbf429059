//! `trueturn._native.Rotations`: the circuit behind `trueturn.Rotations`.

use std::f64::consts::FRAC_PI_4;

use numpy::{PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;

use super::error::to_python;
use crate::clifford::{Clifford, Turn};
use crate::error::{Error, Result};
use crate::frame::Frame;
use crate::operation::joined;
use crate::pauli::PauliString;
use crate::rotations::{Body, Rotation, Rotations};

/// Ordered rotations in repeated blocks, and a global phase.
#[pyclass(frozen, name = "Rotations", module = "trueturn._native")]
pub struct PyRotations {
    /// The circuit itself.
    pub rotations: Rotations,
}

fn made(py: Python<'_>, outcome: Result<Rotations>) -> PyResult<PyRotations> {
    outcome.map(|rotations| PyRotations { rotations }).map_err(|error| to_python(py, error))
}

/// x masks, z masks and angles, written out.
type Columns<'py> = (Vec<u128>, Vec<u128>, Bound<'py, PyArray1<f64>>);

#[pymethods]
impl PyRotations {
    #[staticmethod]
    fn from_list(
        py: Python<'_>,
        x: Vec<u128>,
        z: Vec<u128>,
        angles: PyReadonlyArray1<'_, f64>,
        qubits: u32,
        phase: f64,
    ) -> PyResult<Self> {
        let angles = angles.as_array();
        if x.len() != z.len() || x.len() != angles.len() {
            let message = format!(
                "angles: lengths differ ({} x masks, {} z masks, {} angles); give one of each per rotation",
                x.len(),
                z.len(),
                angles.len()
            );
            return made(py, Err(Error::Rotation { argument: "angles", message }));
        }
        let strings = x.iter().zip(&z).map(|(&x, &z)| PauliString { x, z });
        let list = strings.zip(angles).map(|(string, &angle)| Rotation { string, angle }).collect();
        made(py, Rotations::from_list(qubits, list, phase))
    }

    #[getter]
    fn qubits(&self) -> u32 {
        self.rotations.qubits()
    }

    #[getter]
    fn phase(&self) -> f64 {
        self.rotations.phase()
    }

    #[getter]
    fn count(&self) -> u64 {
        self.rotations.count()
    }

    fn then(&self, py: Python<'_>, next: &Self) -> PyResult<Self> {
        made(py, self.rotations.then(&next.rotations))
    }

    fn times(&self, py: Python<'_>, repeat: u64) -> PyResult<Self> {
        made(py, self.rotations.times(repeat))
    }

    /// The circuit followed by rotations by multiples of π/4, given as whole numbers, by a phase in the same unit, and by
    /// a relabelling.
    fn with_frame(
        &self,
        py: Python<'_>,
        x: Vec<u128>,
        z: Vec<u128>,
        turns: Vec<u8>,
        eighths: u8,
        relabelling: Vec<u32>,
    ) -> PyResult<Self> {
        let mut clifford = Clifford::identity(self.rotations.qubits());
        for ((x, z), turns) in x.into_iter().zip(z).zip(turns) {
            clifford.turn(Turn { string: PauliString { x, z }, turns });
        }
        clifford.phase(eighths);
        made(py, self.rotations.with_frame(&Frame::new(clifford, relabelling)))
    }

    /// The frame's Clifford as rotations with their phase, and where each qubit goes; None without a frame.
    fn frame(&self, py: Python<'_>) -> PyResult<Option<(Self, Vec<u32>)>> {
        let Some(frame) = self.rotations.frame() else { return Ok(None) };
        let phase = f64::from(frame.eighths()) * FRAC_PI_4;
        let clifford = made(py, Rotations::from_list(self.rotations.qubits(), frame.rotations(), phase))?;
        Ok(Some((clifford, frame.relabelling().to_vec())))
    }

    fn inverse(&self) -> Self {
        Self { rotations: self.rotations.inverse() }
    }

    fn same_as(&self, other: &Self) -> bool {
        self.rotations == other.rotations
    }

    /// Each block as a circuit of its own (phase 0), with its repeats.
    fn blocks(&self, py: Python<'_>) -> PyResult<Vec<(Self, u64)>> {
        let qubits = self.rotations.qubits();
        let one = |body: &Body| match body {
            Body::List(list) => Rotations::from_list(qubits, list.to_vec(), 0.0),
            Body::Nested(blocks) => Rotations::from_blocks(qubits, blocks.to_vec(), 0.0),
        };
        self.rotations.blocks().iter().map(|block| Ok((made(py, one(&block.body))?, block.repeat))).collect()
    }

    /// All rotations written out, or None where there are more than `limit`.
    fn written_out<'py>(&self, py: Python<'py>, limit: u64) -> Option<Columns<'py>> {
        let list = self.rotations.written_out(limit)?;
        let angles: Vec<f64> = list.iter().map(|r| r.angle).collect();
        let x = list.iter().map(|r| r.string.x).collect();
        let z = list.iter().map(|r| r.string.z).collect();
        Some((x, z, PyArray1::from_vec(py, angles)))
    }

    /// Each distinct list as written, with the number of times it runs in all.
    fn lists<'py>(&self, py: Python<'py>) -> Vec<(Columns<'py>, u64)> {
        let mut found = Vec::new();
        self.rotations.for_each_list(&mut |list, times| {
            let angles: Vec<f64> = list.iter().map(|r| r.angle).collect();
            let x = list.iter().map(|r| r.string.x).collect();
            let z = list.iter().map(|r| r.string.z).collect();
            found.push(((x, z, PyArray1::from_vec(py, angles)), times));
        });
        found
    }

    /// Two-qubit gates by 2(w-1) for a string of weight w, saturating.
    fn two_qubit_gates(&self) -> u64 {
        crate::cost::two_qubit_gates(&self.rotations)
    }

    /// Depth in two-qubit gates, saturating; see [`crate::cost::depth`].
    fn two_qubit_depth(&self) -> u64 {
        crate::cost::depth(&self.rotations)
    }

    /// Σ |θ| over the rotations that the engine joins in pairs, for rounding bounds.
    fn joined_angle_sum(&self) -> f64 {
        let mut sum = 0.0;
        self.rotations.for_each_list(&mut |list, times| {
            let pairs = joined(list).into_iter().filter_map(|operation| Some((operation.first, operation.second?)));
            sum += times as f64 * pairs.map(|(one, two)| one.angle.abs() + two.angle.abs()).sum::<f64>();
        });
        sum
    }

    /// Σ |θ|, for rounding bounds.
    fn angle_sum(&self) -> f64 {
        let mut sum = 0.0;
        self.rotations.for_each_list(&mut |list, times| {
            sum += times as f64 * list.iter().map(|rotation| rotation.angle.abs()).sum::<f64>();
        });
        sum
    }
}
