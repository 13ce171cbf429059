//! A real sum of Pauli strings, hence a Hermitian operator.
//!
//! | module | holds |
//! | --- | --- |
//! | `text` | the written notation, read and printed |
//! | `collect` | merging of repeated strings in order of first occurrence |
//! | `algebra` | sums, multiples, products, brackets, relabelling |
//! | `locality` | the index from qubits to terms that keeps all of it fast for local operators |
//! | `grouping` | pairwise commutation and greedy commuting groups |
//! | `anticommuting` | a bound on the spectral norm from anticommuting groups |
//!
//! The order of terms is the order in which strings first occur in the input, always: results never depend on hashing.

mod algebra;
mod anticommuting;
mod collect;
mod grouping;
mod locality;
mod text;

use crate::error::{Error, Result};
use crate::pauli::PauliString;
use collect::Sum;

pub use algebra::{Check, Limits};
pub use grouping::commuting_groups;
pub use text::parse_factors;

/// The largest number of qubits: masks have 128 bits.
pub const MAX_QUBITS: u32 = 128;

/// Ordered terms with distinct strings and finite coefficients that are not zero.
#[derive(Clone, Debug, PartialEq)]
pub struct Terms {
    qubits: u32,
    strings: Vec<PauliString>,
    coefficients: Vec<f64>,
}

impl Terms {
    /// Merges repeated strings, keeps the order of first occurrence and drops sums that are exactly zero.
    ///
    /// `qubits` is the number of qubits acted on; `None` means just enough for the strings given, and at least one.
    ///
    /// # Errors
    ///
    /// [`Error::Operator`] for more than 128 qubits or none, a string outside the qubits, a coefficient that is not
    /// finite, or a sum that overflows.
    pub fn new(qubits: Option<u32>, terms: impl IntoIterator<Item = (PauliString, f64)>) -> Result<Self> {
        let terms = terms.into_iter();
        let mut sum = Sum::with_capacity(terms.size_hint().0);
        for (number, (string, coefficient)) in terms.enumerate() {
            if !coefficient.is_finite() {
                return Err(not_finite(number, coefficient));
            }
            sum.add(string, coefficient);
        }
        let used = width(sum.strings());
        let qubits = match qubits {
            None => used.max(1),
            Some(given) => checked_qubits(given, used)?,
        };
        sum.into_terms(qubits)
    }

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

    /// Number of terms.
    pub fn len(&self) -> usize {
        self.strings.len()
    }

    /// Whether this is the zero operator.
    pub fn is_empty(&self) -> bool {
        self.strings.is_empty()
    }

    /// Whether the matrix is real: every string has an even number of Y.
    pub fn is_real(&self) -> bool {
        self.strings.iter().all(|string| string.y_count() & 1 == 0)
    }

    /// The terms as pairs, in order.
    pub fn iter(&self) -> impl ExactSizeIterator<Item = (PauliString, f64)> + '_ {
        self.strings.iter().copied().zip(self.coefficients.iter().copied())
    }

    /// Whether both have the same strings with the same coefficients, in whatever order and on however many qubits.
    pub fn same_as(&self, other: &Self) -> bool {
        if self.len() != other.len() {
            return false;
        }
        let mut mine = Sum::with_capacity(self.len());
        for (string, coefficient) in self.iter() {
            mine.add(string, coefficient);
        }
        other.iter().all(|(string, coefficient)| mine.get(string) == Some(coefficient))
    }
}

/// Number of qubits needed to hold the strings.
fn width(strings: &[PauliString]) -> u32 {
    let support = strings.iter().fold(0, |mask, string| mask | string.support());
    u128::BITS - support.leading_zeros()
}

/// A number of qubits asked for, checked against the limit and against the qubits in use.
fn checked_qubits(given: u32, used: u32) -> Result<u32> {
    if given == 0 || given > MAX_QUBITS {
        let message = format!("qubits: out of range ({given}); give 1 to {MAX_QUBITS}");
        return Err(Error::Operator { argument: "qubits", message });
    }
    if used > given {
        let message = format!("qubits: too few ({given}) for a term on qubit {}; give at least {used}", used - 1);
        return Err(Error::Operator { argument: "qubits", message });
    }
    Ok(given)
}

#[cold]
fn not_finite(number: usize, coefficient: f64) -> Error {
    Error::Operator {
        argument: "coefficients",
        message: format!("coefficients: entry {number} is not finite ({coefficient}); give finite real numbers"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn z(mask: u128) -> PauliString {
        PauliString { x: 0, z: mask }
    }

    #[test]
    fn repeated_strings_merge_in_order_of_first_occurrence() {
        let terms = Terms::new(None, [(z(2), 1.0), (z(1), 2.0), (z(2), 0.5), (z(4), 1.0), (z(4), -1.0)]).unwrap();
        assert_eq!(terms.strings(), [z(2), z(1)]);
        assert_eq!(terms.coefficients(), [1.5, 2.0]);
        assert_eq!(terms.qubits(), 3);
    }

    #[test]
    fn the_number_of_qubits_is_checked() {
        assert_eq!(Terms::new(None, []).unwrap().qubits(), 1);
        assert_eq!(Terms::new(None, [(z(1 << 127), 1.0)]).unwrap().qubits(), 128);
        for qubits in [0, 2, 129] {
            assert!(Terms::new(Some(qubits), [(z(4), 1.0)]).is_err());
        }
    }

    #[test]
    fn overflow_and_numbers_that_are_not_finite_are_refused() {
        assert!(Terms::new(None, [(z(1), f64::NAN)]).is_err());
        assert!(Terms::new(None, [(z(1), f64::INFINITY)]).is_err());
        assert!(Terms::new(None, [(z(1), f64::MAX), (z(1), f64::MAX)]).is_err());
    }

    #[test]
    fn equality_ignores_order() {
        let one = Terms::new(None, [(z(1), 1.0), (z(2), 2.0)]).unwrap();
        let two = Terms::new(Some(5), [(z(2), 2.0), (z(1), 1.0)]).unwrap();
        assert!(one.same_as(&two));
        assert!(!one.same_as(&Terms::new(None, [(z(2), 2.0), (z(1), 1.5)]).unwrap()));
        assert!(!one.same_as(&Terms::new(None, [(z(2), 2.0)]).unwrap()));
    }
}
