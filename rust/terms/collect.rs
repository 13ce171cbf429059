//! Merging of repeated strings.

use std::collections::HashMap;
use std::hash::{BuildHasherDefault, Hasher};

use super::Terms;
use crate::error::{Error, Result};
use crate::pauli::PauliString;

/// A hash of the two masks by multiplication, several times quicker than the standard one.
///
/// It is the same in every run. Only speed depends on it: the order of terms is that of first occurrence.
#[derive(Default)]
pub(super) struct MaskHasher(u64);

impl Hasher for MaskHasher {
    fn write(&mut self, bytes: &[u8]) {
        for &byte in bytes {
            self.write_u128(u128::from(byte));
        }
    }

    #[inline]
    fn write_u128(&mut self, mask: u128) {
        for half in [mask as u64, (mask >> 64) as u64] {
            // Folding the high half of the product back brings every input bit to the low bits, which choose the bucket.
            let wide = u128::from(self.0 ^ half ^ 0x9e37_79b9_7f4a_7c15) * 0xd6e8_feb8_6659_fd93;
            self.0 = (wide as u64) ^ ((wide >> 64) as u64);
        }
    }

    #[inline]
    fn finish(&self) -> u64 {
        self.0
    }
}

/// Bytes for each string at the worst moment: a table of 49-byte slots at least 7/16 full beside its half-sized
/// predecessor (168), and three lists of 56 bytes together at up to twice their length beside their predecessors (168).
const BYTES_PER_STRING: u64 = 336;

/// A sum under construction.
pub(super) struct Sum {
    places: HashMap<PauliString, usize, BuildHasherDefault<MaskHasher>>,
    strings: Vec<PauliString>,
    values: Vec<f64>,
}

impl Sum {
    pub(super) fn with_capacity(capacity: usize) -> Self {
        Self {
            places: HashMap::with_capacity_and_hasher(capacity, BuildHasherDefault::default()),
            strings: Vec::with_capacity(capacity),
            values: Vec::with_capacity(capacity),
        }
    }

    /// Adds to the coefficient of a string and returns the string's place.
    #[inline]
    pub(super) fn add(&mut self, string: PauliString, value: f64) -> usize {
        let next = self.strings.len();
        let place = *self.places.entry(string).or_insert(next);
        if place == next {
            self.strings.push(string);
            self.values.push(value);
        } else {
            self.values[place] += value;
        }
        place
    }

    /// Refuses to grow beyond what fits in so many bytes.
    pub(super) fn check_memory(&self, available: u64) -> Result<()> {
        let needed = BYTES_PER_STRING * self.strings.len() as u64;
        if needed <= available {
            return Ok(());
        }
        let message = format!(
            "other: the result does not fit in memory (over {} strings, {needed} bytes of {available}); \
             combine fewer terms at a time",
            self.strings.len()
        );
        Err(Error::Memory { message, needed, available })
    }

    pub(super) fn strings(&self) -> &[PauliString] {
        &self.strings
    }

    pub(super) fn values(&self) -> &[f64] {
        &self.values
    }

    pub(super) fn get(&self, string: PauliString) -> Option<f64> {
        self.places.get(&string).map(|&place| self.values[place])
    }

    /// The finished operator: sums that are exactly zero are dropped, overflow is refused.
    pub(super) fn into_terms(self, qubits: u32) -> Result<Terms> {
        let Self { strings, values, .. } = self;
        from_distinct(qubits, strings, values)
    }
}

/// An operator from strings known to be distinct: zeros are dropped, overflow is refused.
pub(super) fn from_distinct(qubits: u32, mut strings: Vec<PauliString>, mut coefficients: Vec<f64>) -> Result<Terms> {
    if let Some(place) = coefficients.iter().position(|value| !value.is_finite()) {
        let message = format!(
            "coefficients: the coefficient of {} overflows ({}); scale the operator down",
            super::text::Factors(strings[place]),
            coefficients[place]
        );
        return Err(Error::Operator { argument: "coefficients", message });
    }
    if coefficients.contains(&0.0) {
        let mut keep = coefficients.iter().map(|&value| value != 0.0);
        strings.retain(|_| keep.next().unwrap_or(true));
        coefficients.retain(|&value| value != 0.0);
    }
    Ok(Terms { qubits, strings, coefficients })
}
