//! Which terms can fail to commute with a string, found without looking at all of them.
//!
//! Two strings anticommute only if some qubit carries X or Y in one and Z or Y in the other in such a way that
//! `x & z'` or `z & x'` is not zero. So for each qubit there are two lists: terms with its x bit set, and terms with its z bit
//! set. A string asks the z lists of the qubits in its x mask and the x lists of those in its z mask. Diagonal operators thus
//! never meet each other, however dense, and local ones meet their neighbours only.

use super::MAX_QUBITS;
use crate::pauli::PauliString;

/// The lists, and what is needed to merge several of them without repetition.
pub(super) struct Locality {
    with_x: Vec<Vec<u32>>,
    with_z: Vec<Vec<u32>>,
    length: usize,
    last_asker: Vec<u32>,
    asker: u32,
}

impl Locality {
    pub(super) fn new() -> Self {
        let lists = || (0..MAX_QUBITS).map(|_| Vec::new()).collect();
        Self { with_x: lists(), with_z: lists(), length: 0, last_asker: Vec::new(), asker: 0 }
    }

    pub(super) fn of(strings: &[PauliString]) -> Self {
        let mut index = Self::new();
        for &string in strings {
            index.push(string);
        }
        index
    }

    /// Appends a string; its number is the count of strings before it.
    pub(super) fn push(&mut self, string: PauliString) {
        let number = self.length as u32;
        for qubit in bits(string.x) {
            self.with_x[qubit].push(number);
        }
        for qubit in bits(string.z) {
            self.with_z[qubit].push(number);
        }
        self.length += 1;
        self.last_asker.push(0);
    }

    /// Number of strings that [`Self::each_neighbour`] hands over, repetitions counted.
    pub(super) fn neighbour_bound(&self, string: PauliString) -> usize {
        self.lists(string).map(Vec::len).sum()
    }

    /// Numbers of the strings that may anticommute with `string`, ascending and distinct.
    pub(super) fn neighbours(&mut self, string: PauliString, found: &mut Vec<u32>) {
        found.clear();
        if self.neighbour_bound(string) >= self.length {
            // Dense strings: a scan is cheaper than merging lists of nearly everything.
            found.extend(0..self.length as u32);
            return;
        }
        self.asker += 1;
        let asker = self.asker;
        let mut lists = 0;
        let (with_x, with_z, last_asker) = (&self.with_x, &self.with_z, &mut self.last_asker);
        let of_x = bits(string.x).map(|qubit| &with_z[qubit]);
        let of_z = bits(string.z).map(|qubit| &with_x[qubit]);
        for list in of_x.chain(of_z) {
            lists += 1;
            for &number in list {
                let seen = &mut last_asker[number as usize];
                if *seen != asker {
                    *seen = asker;
                    found.push(number);
                }
            }
        }
        if lists > 1 {
            found.sort_unstable();
        }
    }

    /// Hands over the numbers of the strings that may anticommute with `string`, in any order, some of them repeatedly.
    pub(super) fn each_neighbour(&self, string: PauliString, mut take: impl FnMut(u32)) {
        for list in self.lists(string) {
            for &number in list {
                take(number);
            }
        }
    }

    /// Number of strings in the index.
    pub(super) fn len(&self) -> usize {
        self.length
    }

    fn lists(&self, string: PauliString) -> impl Iterator<Item = &Vec<u32>> {
        let of_x = bits(string.x).map(|qubit| &self.with_z[qubit]);
        let of_z = bits(string.z).map(|qubit| &self.with_x[qubit]);
        of_x.chain(of_z)
    }
}

/// The numbers of the bits that are set, ascending.
pub(super) fn bits(mut mask: u128) -> impl Iterator<Item = usize> {
    std::iter::from_fn(move || {
        if mask == 0 {
            return None;
        }
        let bit = mask.trailing_zeros() as usize;
        mask &= mask - 1;
        Some(bit)
    })
}
