//! NumPy arrays as amplitudes: every check at the door, none later.

use numpy::{Complex32, Complex64, PyArray1, PyArrayMethods, PyReadwriteArray1, PyUntypedArray, PyUntypedArrayMethods};
use pyo3::prelude::*;

use super::error::to_python;
use crate::error::Error;

/// A state vector borrowed from NumPy for the length of a call.
pub enum Amplitudes<'py> {
    /// complex128.
    Double(PyReadwriteArray1<'py, Complex64>),
    /// complex64.
    Single(PyReadwriteArray1<'py, Complex32>),
}

/// Borrows an array for reading and writing, without a copy.
///
/// Arrays that are only read are borrowed for writing too: the engine takes its input by unique reference, and a state in
/// use elsewhere is refused either way.
pub fn borrow<'py>(object: &Bound<'py, PyAny>) -> PyResult<Amplitudes<'py>> {
    let py = object.py();
    let refuse = |error| Err(to_python(py, error));
    let Ok(array) = object.cast::<PyUntypedArray>() else {
        let found = object.get_type().name()?.to_string();
        return refuse(Error::StateType { found, expected: "a numpy.ndarray of complex128 or complex64" });
    };
    if array.ndim() != 1 || !array.len().is_power_of_two() {
        let found = format!("{:?}", array.shape());
        return refuse(Error::StateShape { found, expected: "one dimension of length 2**qubits".into() });
    }
    let flags = array.getattr("flags")?;
    for (flag, reason) in [
        ("c_contiguous", "strided; give numpy.ascontiguousarray(state)"),
        ("aligned", "misaligned; give state.copy()"),
        ("writeable", "read-only; give a copy or set its writeable flag"),
    ] {
        if !flags.getattr(flag)?.extract::<bool>()? {
            return refuse(Error::StateLayout { reason });
        }
    }
    let busy = |_| to_python(py, Error::StateBusy);
    if let Ok(array) = object.cast::<PyArray1<Complex64>>() {
        return array.try_readwrite().map(Amplitudes::Double).map_err(busy);
    }
    if let Ok(array) = object.cast::<PyArray1<Complex32>>() {
        return array.try_readwrite().map(Amplitudes::Single).map_err(busy);
    }
    let found = array.dtype().str()?.to_string();
    refuse(Error::StateType { found, expected: "complex128 or complex64 in native byte order" })
}

/// Borrows an array that must be complex128.
pub fn borrow_double<'py>(object: &Bound<'py, PyAny>) -> PyResult<PyReadwriteArray1<'py, Complex64>> {
    match borrow(object)? {
        Amplitudes::Double(array) => Ok(array),
        Amplitudes::Single(_) => {
            let error = Error::StateType { found: "complex64".into(), expected: "complex128" };
            Err(to_python(object.py(), error))
        }
    }
}

/// The amplitudes of a borrowed array; contiguous by the checks of [`borrow`].
pub fn slice<'a, T: numpy::Element>(py: Python<'_>, array: &'a mut PyReadwriteArray1<'_, T>) -> PyResult<&'a mut [T]> {
    array
        .as_slice_mut()
        .map_err(|_| to_python(py, Error::Internal { message: "a contiguous array gave no slice".into() }))
}
