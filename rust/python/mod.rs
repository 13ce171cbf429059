//! The Python module `trueturn._native`: a list of exports, nothing else.

mod error;
pub mod terms;

use pyo3::prelude::*;

/// The compiled core of trueturn; users import `trueturn`, never this.
#[pymodule]
fn _native(module: &Bound<'_, PyModule>) -> PyResult<()> {
    module.add_class::<terms::PyTerms>()
}
