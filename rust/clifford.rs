//! Clifford operators with their exact global phase, on up to 128 qubits.
//!
//! A Clifford C is kept as what it does to single X and Z by pulling them back, C† X_q C and C† Z_q C, which fixes it up to
//! a phase, and as the state C|0…0>, which fixes that phase; see `witness`. Everything that happens to it is a product
//! with a *quarter turn*, exp(-i π/4 P) for a Pauli string P: those generate the group together with e^{iπ/4}. Pulling back
//! through exp(-i π/4 P) replaces a string Q that anticommutes with P by i P Q, so a gate on two qubits changes four rows.

mod synthesis;
mod witness;

use crate::pauli::PauliString;
use witness::Witness;

/// A Pauli string with a sign.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Signed {
    /// The string.
    pub string: PauliString,
    /// Whether the sign is minus.
    pub negative: bool,
}

impl Signed {
    /// +P.
    pub fn plus(string: PauliString) -> Self {
        Self { string, negative: false }
    }

    /// self · other with `turns` more factors of i, where the result is ± a string.
    fn times(self, other: Self, turns: u8) -> Self {
        let (string, own) = self.string.times(other.string);
        let turns = (own + turns) & 3;
        debug_assert!(turns & 1 == 0, "the product is Hermitian");
        Self { string, negative: self.negative ^ other.negative ^ (turns == 2) }
    }
}

/// exp(-i π/4 turns · string): `turns` counts modulo 8.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Turn {
    /// The string.
    pub string: PauliString,
    /// Multiples of π/4, from 0 to 7.
    pub turns: u8,
}

impl Turn {
    /// The operator that undoes this one.
    pub fn inverse(self) -> Self {
        Self { string: self.string, turns: (8 - self.turns) & 7 }
    }
}

/// A Clifford operator; equality includes the phase.
#[derive(Clone, Debug)]
pub struct Clifford {
    /// C† X_q C and C† Z_q C.
    rows: Vec<[Signed; 2]>,
    witness: Witness,
}

impl PartialEq for Clifford {
    fn eq(&self, other: &Self) -> bool {
        self.rows == other.rows && self.witness.phase_against(&other.witness) == Some(0)
    }
}

fn single(qubit: usize) -> [Signed; 2] {
    [PauliString { x: 1 << qubit, z: 0 }, PauliString { x: 0, z: 1 << qubit }].map(Signed::plus)
}

/// The positions of the set bits.
pub(crate) fn bits(mut mask: u128) -> impl Iterator<Item = usize> {
    std::iter::from_fn(move || {
        let place = (mask != 0).then(|| mask.trailing_zeros() as usize)?;
        mask &= mask - 1;
        Some(place)
    })
}

impl Clifford {
    /// The operator that does nothing.
    pub fn identity(qubits: u32) -> Self {
        Self { rows: (0..qubits as usize).map(single).collect(), witness: Witness::default() }
    }

    /// Number of qubits.
    pub fn qubits(&self) -> u32 {
        self.rows.len() as u32
    }

    /// Acts on more qubits, as the identity there.
    pub fn widen(&mut self, qubits: u32) {
        self.rows.extend((self.rows.len()..qubits as usize).map(single));
    }

    /// Whether this is the identity up to a phase.
    pub fn is_scalar(&self) -> bool {
        self.rows.iter().enumerate().all(|(qubit, rows)| *rows == single(qubit))
    }

    /// C† P C.
    pub fn pull(&self, string: PauliString) -> Signed {
        let mut product = Signed::plus(PauliString::IDENTITY);
        let mut turns = string.y_count() as u8;
        for qubit in bits(string.support()) {
            // Y = i X Z, hence one factor i for each Y; signs and turns are gathered along the way.
            for (row, mask) in self.rows[qubit].iter().zip([string.x, string.z]) {
                if mask >> qubit & 1 == 1 {
                    let (next, own) = product.string.times(row.string);
                    turns = (turns + own + 2 * u8::from(row.negative)) & 3;
                    product.string = next;
                }
            }
        }
        debug_assert!(turns & 1 == 0, "pulled strings stay Hermitian");
        Signed { string: product.string, negative: turns == 2 }
    }

    /// Follows this operator by another: C ← exp(-i π/4 turns · string) C.
    pub fn turn(&mut self, Turn { string, turns }: Turn) {
        let turns = turns & 7;
        self.witness.turn(string, turns);
        if turns & 3 == 0 {
            return;
        }
        let mut pulled = self.pull(string);
        // exp(-i 3π/4 P) is exp(i π/4 P) up to a sign; exp(-i π/2 P) flips what anticommutes with P.
        pulled.negative ^= turns & 3 == 3;
        for qubit in bits(string.support()) {
            for (row, own) in self.rows[qubit].iter_mut().zip(single(qubit)) {
                if own.string.commutes_with(string) {
                    continue;
                }
                if turns & 3 == 2 {
                    row.negative = !row.negative;
                } else {
                    *row = pulled.times(*row, 1);
                }
            }
        }
    }

    /// Multiplies by e^{iπ/4} as often as said.
    pub fn phase(&mut self, eighths: u8) {
        self.witness.shift_phase(eighths);
    }

    /// The phase of a scalar operator in multiples of π/4; None where it is none.
    pub fn scalar_phase(&self) -> Option<u8> {
        if self.is_scalar() { self.witness.phase_against(&Witness::default()) } else { None }
    }

    /// Splits off a relabelling: C = T C', where T sends qubit p to `moves[p]`, with as many qubits as possible that C'
    /// leaves in place. None where T is the identity.
    pub fn split_relabelling(&self) -> Option<(Vec<u32>, Self)> {
        let mut moves: Vec<Option<u32>> = vec![None; self.rows.len()];
        let mut open: Vec<usize> = Vec::new();
        for (qubit, rows) in self.rows.iter().enumerate() {
            let support = rows[0].string.support() | rows[1].string.support();
            match support.is_power_of_two() {
                true => moves[support.trailing_zeros() as usize] = Some(qubit as u32),
                false => open.push(qubit),
            }
        }
        open.retain(|&qubit| match moves[qubit] {
            None => {
                moves[qubit] = Some(qubit as u32);
                false
            }
            Some(_) => true,
        });
        let mut open = open.into_iter();
        let moves: Vec<u32> =
            moves.into_iter().map(|target| target.unwrap_or_else(|| open.next().unwrap_or(0) as u32)).collect();
        if moves.iter().enumerate().all(|(qubit, &target)| qubit == target as usize) {
            return None;
        }
        let rows = moves.iter().map(|&target| self.rows[target as usize]).collect();
        let back = inverted(&moves);
        let relabelled = |mask: u128| move_bits(mask, &back);
        Some((moves, Self { rows, witness: self.witness.relabelled(&relabelled) }))
    }
}

/// The mask with bit q moved to bit `moves[q]`.
pub fn move_bits(mask: u128, moves: &[u32]) -> u128 {
    bits(mask).fold(0, |moved, qubit| moved | 1 << moves[qubit])
}

/// The string with qubit q renamed `moves[q]`.
pub fn move_string(string: PauliString, moves: &[u32]) -> PauliString {
    PauliString { x: move_bits(string.x, moves), z: move_bits(string.z, moves) }
}

/// The permutation that undoes this one.
pub fn inverted(moves: &[u32]) -> Vec<u32> {
    let mut back = vec![0; moves.len()];
    moves.iter().enumerate().for_each(|(qubit, &target)| back[target as usize] = qubit as u32);
    back
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Reproducible turns: the constants of Knuth's linear congruential MMIX generator.
    fn turns(qubits: u32, count: usize, seed: u64) -> Vec<Turn> {
        let mut state = seed;
        let mut next = || {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            u128::from(state >> 24)
        };
        let inside = (1u128 << qubits) - 1;
        let mut one = || Turn {
            string: PauliString {
                x: (next() | next() << 40 | next() << 80) & inside,
                z: (next() | next() << 50) & inside,
            },
            turns: (next() & 7) as u8,
        };
        (0..count).map(|_| one()).collect()
    }

    #[test]
    fn a_product_and_its_inverse_are_the_identity_with_phase_zero() {
        for (qubits, seed) in [(1, 1), (3, 2), (20, 3), (100, 4)] {
            let mut clifford = Clifford::identity(qubits);
            let list = turns(qubits, 60, seed);
            list.iter().for_each(|&turn| clifford.turn(turn));
            let forward = clifford.clone();
            list.iter().rev().for_each(|turn| clifford.turn(turn.inverse()));
            assert_eq!(clifford.scalar_phase(), Some(0));
            let (synthesis, phase) = forward.turns();
            let mut made = Clifford::identity(qubits);
            synthesis.iter().for_each(|&turn| made.turn(turn));
            made.phase(phase);
            assert_eq!(made, forward);
            made.phase(1);
            assert_ne!(made, forward);
        }
    }

    #[test]
    fn the_hadamard_gate_squares_to_one() {
        let z = PauliString { x: 0, z: 1 };
        let x = PauliString { x: 1, z: 0 };
        let mut clifford = Clifford::identity(1);
        for _ in 0..2 {
            [z, x, z].into_iter().for_each(|string| clifford.turn(Turn { string, turns: 1 }));
            clifford.phase(2);
        }
        assert_eq!(clifford.scalar_phase(), Some(0));
    }
}
