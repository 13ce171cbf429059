//! One Pauli string as two bit masks.
//!
//! Qubit `q` owns bit `q` of both masks. The pair (x bit, z bit) means I = (0,0), X = (1,0), Y = (1,1), Z = (0,1), so the
//! string is `i^{|x & z|} X^x Z^z`: one factor `i` for each Y, because `Y = i X Z`. On a basis state
//!
//! ```text
//! P |k> = i^{|x & z|} (-1)^{|k & z|} |k ^ x>
//! ```
//!
//! Worked example on three qubits: `X_0 Y_2` has x = 0b101, z = 0b100 and one Y. It sends |000> to i |101> and |100> to
//! -i |001>. The rotation of angle θ about P is exp(-i θ P), without a factor 1/2.

/// A tensor product of I, X, Y and Z on up to 128 qubits, phase +1.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct PauliString {
    /// Bit `q` is set where qubit `q` carries X or Y.
    pub x: u128,
    /// Bit `q` is set where qubit `q` carries Z or Y.
    pub z: u128,
}

impl PauliString {
    /// The string that does nothing.
    pub const IDENTITY: Self = Self { x: 0, z: 0 };

    /// Qubits on which the string is not the identity, as a mask.
    #[inline]
    pub fn support(self) -> u128 {
        self.x | self.z
    }

    /// Number of qubits on which the string is not the identity.
    #[inline]
    pub fn weight(self) -> u32 {
        self.support().count_ones()
    }

    /// Number of Y factors.
    #[inline]
    pub fn y_count(self) -> u32 {
        (self.x & self.z).count_ones()
    }

    /// Whether the two strings commute: they anticommute on an even number of qubits.
    #[inline]
    pub fn commutes_with(self, other: Self) -> bool {
        ((self.x & other.z) ^ (self.z & other.x)).count_ones() & 1 == 0
    }

    /// The product `self · other` as a string and a power of i: `self · other = i^quarter_turns · string`.
    #[inline]
    pub fn times(self, other: Self) -> (Self, u8) {
        let product = Self { x: self.x ^ other.x, z: self.z ^ other.z };
        // i^{y1} X^x1 Z^z1 · i^{y2} X^x2 Z^z2: moving Z^z1 past X^x2 costs (-1)^{|z1 & x2|}; the result owns i^{y}.
        let turns = self.y_count() + other.y_count() + 2 * (self.z & other.x).count_ones() + 3 * product.y_count();
        (product, (turns & 3) as u8)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const X: PauliString = PauliString { x: 1, z: 0 };
    const Y: PauliString = PauliString { x: 1, z: 1 };
    const Z: PauliString = PauliString { x: 0, z: 1 };

    #[test]
    fn single_qubit_products_follow_the_multiplication_table() {
        assert_eq!(X.times(Y), (Z, 1));
        assert_eq!(Y.times(Z), (X, 1));
        assert_eq!(Z.times(X), (Y, 1));
        assert_eq!(Y.times(X), (Z, 3));
        for p in [X, Y, Z] {
            assert_eq!(p.times(p), (PauliString::IDENTITY, 0));
        }
    }

    #[test]
    fn strings_commute_when_they_differ_on_an_even_number_of_qubits() {
        let xx = PauliString { x: 0b11, z: 0 };
        let zz = PauliString { x: 0, z: 0b11 };
        assert!(xx.commutes_with(zz));
        assert!(!X.commutes_with(Z));
    }
}
