//! The one place where a cause from the core becomes a Python exception.

use pyo3::prelude::*;
use pyo3::types::{PyDict, PyType};

use crate::error::Error;

/// Makes the exception `trueturn.errors.<class>` with a message and its attributes.
fn raise(py: Python<'_>, class: &str, message: String, details: &Bound<'_, PyDict>) -> PyErr {
    let made = py
        .import("trueturn.errors")
        .and_then(|module| module.getattr(class))
        .and_then(|class| Ok(class.cast_into::<PyType>()?))
        .and_then(|class| class.call((message,), Some(details)));
    match made {
        Ok(instance) => PyErr::from_value(instance),
        Err(failure) => failure,
    }
}

/// Translates a core error into its class of `trueturn.errors`.
pub fn to_python(py: Python<'_>, error: Error) -> PyErr {
    let message = error.to_string();
    let details = PyDict::new(py);
    let filled = match &error {
        Error::Term { line, column, text, .. } => {
            details.set_item("text", text).and_then(|()| details.set_item("position", (line, column)))
        }
        Error::Operator { argument, .. } | Error::Rotation { argument, .. } | Error::Argument { argument, .. } => {
            details.set_item("argument", argument)
        }
        Error::Qasm { file, line, column, .. } => details
            .set_item("path", file)
            .and_then(|()| details.set_item("line", line))
            .and_then(|()| details.set_item("column", column)),
        Error::StateShape { found, expected } => {
            details.set_item("shape", found).and_then(|()| details.set_item("expected", expected))
        }
        Error::StateType { found, expected } => {
            details.set_item("dtype", found).and_then(|()| details.set_item("expected", expected))
        }
        Error::StateLayout { reason } => details.set_item("reason", reason),
        Error::Memory { needed, available, .. } => details
            .set_item("needed", needed)
            .and_then(|()| details.set_item("available", available))
            .and_then(|()| details.set_item("largest_qubits", -1)),
        Error::StateBusy | Error::Cancelled { .. } | Error::Abandoned | Error::Internal { .. } => Ok(()),
    };
    if let Err(failure) = filled {
        return failure;
    }
    let class = match error {
        Error::Term { .. } => "TermError",
        Error::Operator { .. } => "OperatorError",
        Error::Rotation { .. } => "RotationError",
        Error::Qasm { .. } => "QasmError",
        Error::Argument { .. } => "ArgumentError",
        Error::StateShape { .. } => "StateShapeError",
        Error::StateType { .. } => "StateTypeError",
        Error::StateLayout { .. } => "StateLayoutError",
        Error::StateBusy => "StateBusyError",
        Error::Memory { .. } => "MemoryRefusedError",
        Error::Cancelled { .. } => return pyo3::exceptions::PyKeyboardInterrupt::new_err(message),
        Error::Abandoned => "StateSpoiledError",
        Error::Internal { .. } => "InternalError",
    };
    raise(py, class, message, &details)
}
