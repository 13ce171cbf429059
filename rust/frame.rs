//! What a circuit ends with beside rotations: a Clifford, then a relabelling of qubits.

use std::f64::consts::FRAC_PI_4;

use crate::clifford::{Clifford, Signed, Turn, inverted, move_string};
use crate::pauli::PauliString;
use crate::rotations::Rotation;

/// The operator T C: first the Clifford C, then T, which moves qubit q to `relabelling[q]`.
#[derive(Clone, Debug)]
pub struct Frame {
    clifford: Clifford,
    relabelling: Vec<u32>,
    turns: Vec<Turn>,
    eighths: u8,
}

impl PartialEq for Frame {
    fn eq(&self, other: &Self) -> bool {
        self.relabelling == other.relabelling && self.clifford == other.clifford
    }
}

impl Frame {
    /// Takes both; a relabelling hidden in the Clifford, such as three cx for a swap, is moved over.
    pub fn new(clifford: Clifford, relabelling: Vec<u32>) -> Self {
        let (clifford, relabelling) = match clifford.split_relabelling() {
            Some((moves, rest)) => (rest, moves.iter().map(|&target| relabelling[target as usize]).collect()),
            None => (clifford, relabelling),
        };
        let (turns, eighths) = clifford.turns();
        Self { clifford, relabelling, turns, eighths }
    }

    /// The frame that does nothing.
    pub fn identity(qubits: u32) -> Self {
        let clifford = Clifford::identity(qubits);
        Self { clifford, relabelling: (0..qubits).collect(), turns: vec![], eighths: 0 }
    }

    /// Whether this is the identity up to a phase.
    pub fn is_scalar(&self) -> bool {
        self.turns.is_empty() && self.keeps_places()
    }

    /// Whether no qubit moves.
    pub fn keeps_places(&self) -> bool {
        self.relabelling.iter().enumerate().all(|(qubit, &target)| qubit == target as usize)
    }

    /// Where each qubit goes.
    pub fn relabelling(&self) -> &[u32] {
        &self.relabelling
    }

    /// The Clifford as quarter turns, first in time first; its phase stands apart.
    pub fn turns(&self) -> &[Turn] {
        &self.turns
    }

    /// The phase of the Clifford over its turns, in multiples of π/4.
    pub fn eighths(&self) -> u8 {
        self.eighths
    }

    /// The Clifford as rotations by multiples of π/4.
    pub fn rotations(&self) -> Vec<Rotation> {
        self.turns.iter().map(|&turn| rotation(turn)).collect()
    }

    /// F† P F.
    pub fn pull(&self, string: PauliString) -> Signed {
        self.clifford.pull(move_string(string, &inverted(&self.relabelling)))
    }

    /// The frame on more qubits, which it leaves alone.
    pub fn widened(&self, qubits: u32) -> Self {
        let mut wider = self.clone();
        wider.clifford.widen(qubits);
        wider.relabelling.extend(self.relabelling.len() as u32..qubits);
        wider
    }

    /// The frame on the first qubits only; None where it does something to others.
    pub fn narrowed(&self, qubits: u32) -> Option<Self> {
        let outside = if qubits >= 128 { 0 } else { u128::MAX << qubits };
        let moved = self.relabelling.iter().enumerate().skip(qubits as usize).any(|(at, &to)| at != to as usize);
        if moved || self.turns.iter().any(|turn| turn.string.support() & outside != 0) {
            return None;
        }
        let mut clifford = Clifford::identity(qubits);
        self.turns.iter().for_each(|&turn| clifford.turn(turn));
        clifford.phase(self.eighths);
        Some(Self::new(clifford, self.relabelling[..qubits as usize].to_vec()))
    }

    /// This frame, then the next one.
    pub fn then(&self, next: &Self) -> Self {
        let back = inverted(&self.relabelling);
        let mut clifford = self.clifford.clone();
        for turn in &next.turns {
            clifford.turn(Turn { string: move_string(turn.string, &back), ..*turn });
        }
        clifford.phase(next.eighths);
        let relabelling = self.relabelling.iter().map(|&target| next.relabelling[target as usize]).collect();
        Self::new(clifford, relabelling)
    }

    /// The frame that undoes this one.
    pub fn inverse(&self) -> Self {
        // (T C)† = T† (T C† T†).
        let mut clifford = Clifford::identity(self.clifford.qubits());
        for turn in self.turns.iter().rev() {
            let string = move_string(turn.string, &self.relabelling);
            clifford.turn(Turn { string, ..turn.inverse() });
        }
        clifford.phase((8 - self.eighths) & 7);
        Self::new(clifford, inverted(&self.relabelling))
    }

    /// The frame as often as said, by squaring.
    pub fn power(&self, mut repeat: u64) -> Self {
        let mut result = Self::identity(self.clifford.qubits());
        let mut square = self.clone();
        while repeat > 0 {
            if repeat & 1 == 1 {
                result = result.then(&square);
            }
            repeat >>= 1;
            if repeat > 0 {
                square = square.then(&square);
            }
        }
        result
    }
}

/// The turn as a rotation by at most half a turn; the sign of exp(-iπ P) = -1 stays inside the angle.
fn rotation(turn: Turn) -> Rotation {
    // Only 1, 2 and 7 occur in a synthesis; 7 is -1 up to the sign of a whole turn, which is 1.
    let turns = if turn.turns > 4 { f64::from(turn.turns) - 8.0 } else { f64::from(turn.turns) };
    Rotation { string: turn.string, angle: turns * FRAC_PI_4 }
}
