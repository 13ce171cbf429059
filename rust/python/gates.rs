//! Circuits as gates: counted, or written through a callable. Names and numbers are checked on the Python side.

use pyo3::prelude::*;

use super::error::to_python;
use super::gateway::run_checked;
use super::rotations::PyRotations;
use crate::error::Error;
use crate::gates::compile::{Native, Options, Order, Routing, compile};
use crate::gates::count::Counter;
use crate::gates::device::{Device, Layout};
use crate::gates::ladder::Shape;
use crate::gates::text::Text;

/// What circuits are written for.
#[pyclass(frozen, name = "GateOptions", module = "trueturn._native")]
pub struct PyGateOptions {
    options: Options,
}

#[pymethods]
impl PyGateOptions {
    #[new]
    #[expect(clippy::too_many_arguments, reason = "one for each option; called by name")]
    fn new(
        py: Python<'_>,
        shape: &str,
        order: &str,
        join: bool,
        native: &str,
        qubits: usize,
        edges: Option<Vec<(u16, u16)>>,
        routing: &str,
        layout: Vec<u16>,
    ) -> PyResult<Self> {
        let unknown = |argument: &'static str, value: &str| {
            to_python(py, Error::Argument { argument, message: format!("{argument}: unknown ({value}); see the docs") })
        };
        let options = Options {
            shape: match shape {
                "staircase" => Shape::Staircase,
                "balanced" => Shape::Balanced,
                "hub" => Shape::Hub,
                _ => return Err(unknown("ladder", shape)),
            },
            order: match order {
                "ascending" => Order::Ascending,
                "z-first" => Order::ZFirst,
                _ => return Err(unknown("order", order)),
            },
            join,
            native: match native {
                "cx" => Native::Cx,
                "cz" => Native::Cz,
                "zz" => Native::Zz,
                _ => return Err(unknown("native", native)),
            },
            qubits,
            device: edges.map(|edges| Device::new(qubits, &edges)),
            routing: match routing {
                "bridges" => Routing::Bridges,
                "swaps" => Routing::Swaps,
                _ => return Err(unknown("routing", routing)),
            },
            layout: Layout::new(layout, qubits),
        };
        Ok(Self { options })
    }
}

/// Controlled gates, zz gates, swaps, one-qubit gates; Clifford, T-like and other rotations; depth, two-qubit depth.
type Numbers = (u64, u64, u64, u64, u64, u64, u64, u64, u64);

/// Counts the gates of a circuit; also gives where its qubits end.
#[pyfunction]
pub fn gate_counts(py: Python<'_>, circuit: &PyRotations, options: &PyGateOptions) -> PyResult<(Numbers, Vec<u16>)> {
    let (rotations, options) = (&circuit.rotations, &options.options);
    let mut counter = Counter::new(options.qubits, u64::MAX);
    let end = run_checked(py, |check| compile(rotations, options, &mut counter, check))?;
    let counts = counter.counts;
    let numbers = (
        counts.controlled,
        counts.zz,
        counts.swaps,
        counts.one_qubit,
        counts.clifford_rotations,
        counts.t_rotations,
        counts.other_rotations,
        counter.depth().unwrap_or(u64::MAX),
        counter.two_qubit_depth().unwrap_or(u64::MAX),
    );
    Ok((numbers, end.physical))
}

/// Calls `write` with the statements of a circuit, piece by piece; with `loops` repeated blocks become loops.
#[pyfunction]
pub fn write_gates(
    py: Python<'_>,
    circuit: &PyRotations,
    options: &PyGateOptions,
    loops: bool,
    write: Py<PyAny>,
) -> PyResult<()> {
    let (rotations, options) = (&circuit.rotations, &options.options);
    let mut raised = None;
    let outcome = run_checked(py, |check| {
        let mut hand_on = |text: &str| {
            Python::attach(|py| py.check_signals().and_then(|()| write.call1(py, (text,)))).map(drop).map_err(|error| {
                raised = Some(error);
                Error::Cancelled { passes_done: 0 }
            })
        };
        let mut text = Text::new(loops, &mut hand_on);
        compile(rotations, options, &mut text, check)?;
        text.finish()
    });
    match raised {
        Some(raised) => Err(raised),
        None => outcome,
    }
}

/// The global phase of a circuit, its identity strings included, in radians.
#[pyfunction]
pub fn global_phase(circuit: &PyRotations) -> f64 {
    crate::gates::totals::global_phase(&circuit.rotations)
}

/// How often each pair of qubits is a rung of an ascending ladder, row by row.
#[pyfunction]
pub fn rung_counts(circuit: &PyRotations) -> Vec<f64> {
    crate::gates::totals::rung_counts(&circuit.rotations)
}
