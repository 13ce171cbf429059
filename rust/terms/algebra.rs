//! Sums, multiples, products and brackets.
//!
//! With A = Σ a_j P_j and B = Σ b_k Q_k, a pair of strings that commutes puts the real number ±a_j b_k on the string of
//! P_j Q_k, and a pair that anticommutes puts an imaginary one there. So AB is Hermitian exactly when all the imaginary
//! contributions cancel, which is the same as A and B commuting, and i[A, B] is made of the anticommuting pairs alone.
//!
//! "Cancel" is meant up to rounding. A string that receives m contributions c_1 … c_m, each the rounded product of two exact
//! coefficients, is off by at most u Σ|c| from the products and (m - 1) u Σ|c| from the additions, to first order in
//! u = 2^-53 (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., section 4.2). The test used is
//! |Σ c| <= (m + 1) u Σ|c|: the one more covers the second order and the rounding of the test itself while 2 m² u < 1.
//! Products that underflow are off by 2^-1075 more, so (m + 1) 2^-1074 is allowed too. A single contribution is the product of
//! two numbers that are not zero and never vanishes.

use super::collect::{Sum, from_distinct};
use super::locality::{Locality, bits};
use super::{MAX_QUBITS, Terms};
use crate::error::{Error, Result};
use crate::pauli::PauliString;

const UNIT_ROUNDOFF: f64 = f64::EPSILON / 2.0;

/// 2^-1074.
const SMALLEST: f64 = f64::MIN_POSITIVE * f64::EPSILON;

/// Asked now and then during long work: `Err` stops it.
pub type Check<'a> = &'a mut dyn FnMut() -> Result<()>;

/// What long work may use, and who may stop it.
pub struct Limits<'a> {
    /// Bytes that the result may take while it grows.
    pub memory: u64,
    /// Asked every few milliseconds.
    pub check: Check<'a>,
}

/// Pairs of terms between two looks at the limits: some milliseconds of work.
const PAIRS_PER_CHECK: usize = 1 << 17;

impl Terms {
    /// The sum, on the larger number of qubits; the terms of `self` come first.
    ///
    /// # Errors
    ///
    /// [`Error::Operator`] if a coefficient overflows, as in every operation below.
    pub fn plus(&self, other: &Self) -> Result<Self> {
        self.combine(other, 1.0)
    }

    /// The difference, on the larger number of qubits; the terms of `self` come first.
    pub fn minus(&self, other: &Self) -> Result<Self> {
        self.combine(other, -1.0)
    }

    fn combine(&self, other: &Self, factor: f64) -> Result<Self> {
        let mut sum = Sum::with_capacity(self.len() + other.len());
        for (string, coefficient) in self.iter() {
            sum.add(string, coefficient);
        }
        for (string, coefficient) in other.iter() {
            sum.add(string, factor * coefficient);
        }
        sum.into_terms(self.qubits().max(other.qubits()))
    }

    /// The multiple by a finite number.
    pub fn scaled(&self, factor: f64) -> Result<Self> {
        let coefficients = self.coefficients().iter().map(|value| factor * value).collect();
        from_distinct(self.qubits(), self.strings().to_vec(), coefficients)
    }

    /// The quotient by a finite number that is not zero.
    pub fn divided(&self, divisor: f64) -> Result<Self> {
        let coefficients = self.coefficients().iter().map(|value| value / divisor).collect();
        from_distinct(self.qubits(), self.strings().to_vec(), coefficients)
    }

    /// The product, when it is Hermitian.
    ///
    /// # Errors
    ///
    /// [`Error::Operator`] if the two do not commute, and what `limits` demand.
    pub fn times(&self, other: &Self, limits: &mut Limits) -> Result<Self> {
        if !self.bracket_vanishes(other, limits)? {
            let message = "other: the product is not Hermitian because the two operators do not commute; \
                           use bracket(other) for i[A, B], which always is";
            return Err(Error::Operator { argument: "other", message: message.to_owned() });
        }
        let mut sum = Sum::with_capacity(self.len().max(other.len()));
        let mut pairs = 0;
        for (left, a) in self.iter() {
            pause(&mut pairs, other.len(), &sum, limits)?;
            for (right, b) in other.iter() {
                let (string, turns) = left.times(right);
                if turns & 1 == 0 {
                    sum.add(string, if turns == 0 { a * b } else { -(a * b) });
                }
            }
        }
        sum.into_terms(self.qubits().max(other.qubits()))
    }

    /// i[A, B], which is Hermitian again. Coefficients that rounding leaves almost zero are kept.
    ///
    /// # Errors
    ///
    /// [`Error::Operator`] if a coefficient overflows, and what `limits` demand.
    pub fn bracket(&self, other: &Self, limits: &mut Limits) -> Result<Self> {
        let (sum, _) = self.half_bracket(other, limits)?;
        sum.into_terms(self.qubits().max(other.qubits()))?.scaled(2.0)
    }

    /// Whether [A, B] = 0 up to the rounding bound of this module's introduction.
    ///
    /// # Errors
    ///
    /// As for [`Terms::bracket`].
    pub fn bracket_vanishes(&self, other: &Self, limits: &mut Limits) -> Result<bool> {
        let (sum, sizes) = self.half_bracket(other, limits)?;
        if sum.values().iter().any(|value| !value.is_finite()) {
            // Only to name the coefficient that overflowed.
            return sum.into_terms(MAX_QUBITS).map(|_| false);
        }
        let vanishes = |value: f64, count: f64, size: f64| {
            count > 1.0 && value.abs() <= (count + 1.0) * (UNIT_ROUNDOFF * size + SMALLEST)
        };
        Ok(sum.values().iter().zip(&sizes).all(|(&value, &(count, size))| vanishes(value, count, size)))
    }

    /// i[A, B]/2, and for each string the count and total size of its contributions.
    ///
    /// Contributions come in the order of the terms of `self`, then of `other`.
    fn half_bracket(&self, other: &Self, limits: &mut Limits) -> Result<(Sum, Vec<(f64, f64)>)> {
        let mut index = Locality::of(other.strings());
        let mut near = Vec::new();
        let mut sum = Sum::with_capacity(0);
        let mut sizes: Vec<(f64, f64)> = Vec::new();
        let mut pairs = 0;
        for (left, a) in self.iter() {
            index.neighbours(left, &mut near);
            pause(&mut pairs, near.len(), &sum, limits)?;
            for &number in &near {
                let right = other.strings()[number as usize];
                if !left.commutes_with(right) {
                    // PQ = i^t R with t = 1 or 3, and i[P, Q]/2 = i^{t+1} R.
                    let (string, turns) = left.times(right);
                    let value = a * other.coefficients()[number as usize];
                    let place = sum.add(string, if turns == 1 { -value } else { value });
                    if place == sizes.len() {
                        sizes.push((0.0, 0.0));
                    }
                    sizes[place].0 += 1.0;
                    sizes[place].1 += value.abs();
                }
            }
        }
        Ok((sum, sizes))
    }

    /// The same operator with qubit `q` renamed to `new_names[q]`.
    ///
    /// # Errors
    ///
    /// [`Error::Operator`] if two qubits in use get one name or a name is 128 or more.
    pub fn relabelled(&self, new_names: &[u32]) -> Result<Self> {
        let refuse = |message: String| Err(Error::Operator { argument: "names", message });
        let support = self.strings().iter().fold(0, |mask, string| mask | string.support());
        let mut taken = 0u128;
        for old in bits(support) {
            let Some(&new) = new_names.get(old) else {
                return refuse(format!("names: qubit {old} has no new name; name every qubit in use"));
            };
            if new >= MAX_QUBITS {
                return refuse(format!("names: out of range ({new}); give qubits from 0 to {}", MAX_QUBITS - 1));
            }
            if taken >> new & 1 == 1 {
                return refuse(format!("names: two qubits become {new}; give distinct new names"));
            }
            taken |= 1 << new;
        }
        let moved = |mask: u128| bits(mask).fold(0u128, |all, old| all | 1 << new_names[old]);
        let strings: Vec<_> =
            self.strings().iter().map(|string| PauliString { x: moved(string.x), z: moved(string.z) }).collect();
        let qubits = super::width(&strings).max(self.qubits());
        from_distinct(qubits, strings, self.coefficients().to_vec())
    }
}

fn pause(pairs: &mut usize, more: usize, sum: &Sum, limits: &mut Limits) -> Result<()> {
    *pairs += more;
    if *pairs >= PAIRS_PER_CHECK {
        *pairs = 0;
        sum.check_memory(limits.memory)?;
        (limits.check)()?;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn terms(text: &str) -> Terms {
        Terms::parse(text, None).unwrap()
    }

    fn bracket(left: &str, right: &str) -> String {
        let mut limits = Limits { memory: u64::MAX, check: &mut || Ok(()) };
        terms(left).bracket(&terms(right), &mut limits).unwrap().to_string()
    }

    #[test]
    fn sums_keep_the_order_of_first_occurrence() {
        let sum = terms("X_0 + Z_1").plus(&terms("Y_2 + Z_1 - X_0")).unwrap();
        assert_eq!(sum.to_string(), "2.0 Z_1 + 1.0 Y_2");
        assert_eq!(terms("X_0").minus(&terms("X_0")).unwrap().to_string(), "0.0");
    }

    #[test]
    fn the_bracket_has_the_sign_of_the_commutator() {
        // [X, Y] = 2 i Z, so i[X, Y] = -2 Z.
        assert_eq!(bracket("X_0", "Y_0"), "-2.0 Z_0");
        assert_eq!(bracket("Y_0", "X_0"), "2.0 Z_0");
    }

    #[test]
    fn cancellation_is_seen_through_rounding() {
        let mut limits = Limits { memory: u64::MAX, check: &mut || Ok(()) };
        let heisenberg = terms("0.1 X_0 X_1 + 0.1 Y_0 Y_1 + 0.7 Z_0 Z_1 + 0.3 X_1 X_2 + 0.3 Y_1 Y_2");
        assert!(heisenberg.bracket_vanishes(&terms("0.3 Z_0 + 0.3 Z_1 + 0.3 Z_2"), &mut limits).unwrap());
        assert!(!heisenberg.bracket_vanishes(&terms("0.3 Z_0 + 0.3 Z_1 + 0.300001 Z_2"), &mut limits).unwrap());
        assert!(terms("X_0").times(&terms("Z_0"), &mut limits).is_err());
        let square = terms("X_0 + Z_0").times(&terms("X_0 + Z_0"), &mut limits).unwrap();
        assert_eq!(square.to_string(), "2.0");
    }

    #[test]
    fn relabelling_refuses_to_merge_qubits() {
        let pair = terms("X_0 Z_1");
        assert_eq!(pair.relabelled(&[1, 0]).unwrap().to_string(), "1.0 Z_0 X_1");
        assert_eq!(pair.relabelled(&[7, 0]).unwrap().qubits(), 8);
        assert!(pair.relabelled(&[1, 1]).is_err());
        assert!(pair.relabelled(&[1, 128]).is_err());
        assert!(pair.relabelled(&[1]).is_err());
    }
}
