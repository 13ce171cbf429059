//! The Python module `trueturn._native`: a list of exports, nothing else.

mod arrays;
mod error;
pub mod gates;
mod gateway;
pub mod qasm;
pub mod rotations;
pub mod state;
pub mod terms;

use pyo3::prelude::*;

/// The compiled core of trueturn; users import `trueturn`, never this.
#[pymodule]
mod _native {
    #[pymodule_export]
    use super::gates::{PyGateOptions, gate_counts, global_phase, rung_counts, write_gates};
    #[pymodule_export]
    use super::qasm::read_qasm;
    #[pymodule_export]
    use super::rotations::PyRotations;
    #[pymodule_export]
    use super::state::{
        application_rounding, apply_terms, chebyshev_sums, clear, distance, evolve, expectations, image_rounding,
        instruction_sets, overlap, pairwise_sum, real_chebyshev_sums, squared_norms,
    };
    #[pymodule_export]
    use super::terms::PyTerms;
}
