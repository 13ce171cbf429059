//! `trueturn._native.Rotations`: the circuit behind `trueturn.Rotations`.

use std::f64::consts::FRAC_PI_4;

use numpy::{PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;

use super::error::to_python;
use super::gateway::{Spoils, run};
use crate::clifford::{Clifford, Turn};
use crate::error::{Error, Result};
use crate::evolve::{Planned, together};
use crate::frame::Frame;
use crate::kernel::lanes::Real;
use crate::operation::joined;
use crate::pauli::PauliString;
use crate::rotations::{Block, Body, Rotation, Rotations};
use crate::team::Control;

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

    /// The circuit on its first qubits only; None where it does something to others.
    fn narrowed(&self, qubits: u32) -> Option<Self> {
        self.rotations.narrowed(qubits).map(|rotations| Self { rotations })
    }

    /// The circuit on more qubits, which it leaves alone.
    fn widened(&self, qubits: u32) -> Self {
        Self { rotations: self.rotations.clone().widened(qubits.clamp(self.rotations.qubits(), 128)) }
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

    /// What the engine makes of the circuit: for each planned list the times that it runs, and for each of its passes the
    /// rotations, the dimension of its cosets, whether these are contiguous, its runs over tiles and its operations.
    fn passes(&self, py: Python<'_>, single: bool) -> PyResult<Vec<PlannedList>> {
        run(py, u64::MAX, Spoils::Nothing, None, |control| match single {
            true => planned_lists::<f32>(&self.rotations, control),
            false => planned_lists::<f64>(&self.rotations, control),
        })
    }

    /// Bounds on the rounding of all operations that the engine makes of the circuit, see
    /// [`Operation::rounding`](crate::operation::Operation::rounding): in roundoffs of amplitudes, and of doubles. Where no
    /// state vector is that large, each rotation counts by itself.
    fn rounding_units(&self) -> (f64, f64) {
        if self.rotations.qubits() > LARGEST_STATE {
            return (LONE_ROTATION * self.rotations.count() as f64, 0.0);
        }
        let (mut units, mut angles) = (0.0, 0.0);
        each_block(self.rotations.blocks(), 1, &mut |list, repeat, times| {
            for (list, own) in together(list, repeat) {
                for (roundings, sums) in joined(&list).iter().map(|operation| operation.rounding()) {
                    units += times as f64 * own as f64 * roundings;
                    angles += times as f64 * own as f64 * sums;
                }
            }
        });
        (units, angles)
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

/// Qubits of the largest state that an address space holds.
const LARGEST_STATE: u32 = 62;
/// Roundings of a rotation that joins no other.
const LONE_ROTATION: f64 = 8.0;

/// Calls `take(list, repeat, times)` for each list with its own repeat and that of all around it.
fn each_block(blocks: &[Block], times: u64, take: &mut dyn FnMut(&[Rotation], u64, u64)) {
    for block in blocks {
        match &block.body {
            Body::List(list) => take(list, block.repeat, times),
            Body::Nested(blocks) => each_block(blocks, times.saturating_mul(block.repeat), take),
        }
    }
}

/// Times, and the figures of each pass.
type PlannedList = (u64, Vec<(usize, u32, bool, usize, usize)>);

fn planned_lists<T: Real>(rotations: &Rotations, control: &Control) -> Result<Vec<PlannedList>> {
    let mut found = vec![];
    Planned::<T>::circuit(rotations, control)?.each_list(1, &mut |passes, times| {
        let figures = passes.iter().map(|pass| {
            let contiguous = pass.space.is_contiguous();
            (pass.rotations, pass.space.dimension(), contiguous, pass.work.runs(), pass.work.operations())
        });
        found.push((times, figures.collect()));
    });
    Ok(found)
}
