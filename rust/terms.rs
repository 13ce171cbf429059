//! A real sum of Pauli strings, hence a Hermitian operator.

use crate::pauli::PauliString;

/// Ordered terms with distinct strings and finite coefficients that are not zero.
#[derive(Clone, Debug, PartialEq)]
pub struct Terms {
    qubits: u32,
    strings: Vec<PauliString>,
    coefficients: Vec<f64>,
}

impl Terms {
    /// Number of qubits that the operator acts on, at most 128.
    pub fn qubits(&self) -> u32 {
        self.qubits
    }

    /// The strings, in the order given.
    pub fn strings(&self) -> &[PauliString] {
        &self.strings
    }

    /// The coefficient of each string.
    pub fn coefficients(&self) -> &[f64] {
        &self.coefficients
    }
}
