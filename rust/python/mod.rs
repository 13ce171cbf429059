//! The Python module `trueturn._native`: a list of exports, nothing else.

mod error;

use pyo3::prelude::*;

/// The compiled core of trueturn; users import `trueturn`, never this.
#[pymodule]
fn _native(_module: &Bound<'_, PyModule>) -> PyResult<()> {
    Ok(())
}
