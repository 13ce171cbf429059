//! Turns gates into rotations by conjugation, one gate at a time.
//!
//! What was read so far is e^{iφ} T C R: rotations R, then a Clifford C, then a relabelling T. A rotation exp(-i θ P) that comes
//! next is e^{iφ} T C exp(-i θ Q) R with Q = C† T† P T C, so it joins R as Q, and a Clifford gate joins C. That is how
//! cx, rz, cx reads back as one rotation about Z Z: the first cx changes C, rz joins R, the second cx restores C. Swaps change T
//! alone. Work and memory for a gate do not depend on how many came before.

use std::f64::consts::FRAC_PI_4;

use super::library::{Move, rotates, weighted};
use super::refusal::{Place, Refusal};
use crate::clifford::{Clifford, Turn, inverted, move_string};
use crate::error::Result;
use crate::frame::Frame;
use crate::pauli::PauliString;
use crate::rotations::{Block, Body, Rotation, Rotations, mapped};

/// Which rotations by multiples of π/4 stay rotations instead of joining the Clifford.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Keep {
    /// None of them: rx(π/2) is a change of basis.
    Nothing,
    /// Those that are diagonal: rz(π/2) is a rotation, rx(π/2) a change of basis.
    Diagonal,
    /// All of gates with an angle.
    Rotations,
    /// Clifford gates too: every gate is written as rotations.
    Everything,
}

/// A sum of many floats with the rounding of one.
///
/// A. Neumaier, Z. Angew. Math. Mech. 54, 39 (1974).
#[derive(Clone, Copy, Debug, Default)]
struct Sum {
    head: f64,
    tail: f64,
}

impl Sum {
    fn add(&mut self, value: f64) {
        let sum = self.head + value;
        self.tail += if self.head.abs() >= value.abs() { self.head - sum + value } else { value - sum + self.head };
        self.head = sum;
    }

    fn value(self) -> f64 {
        self.head + self.tail
    }

    /// The sum less a multiple of 2π.
    fn turned(self) -> f64 {
        // 2π to twice the precision of a float.
        const HEAD: f64 = std::f64::consts::TAU;
        const TAIL: f64 = 2.449_293_598_294_706_4e-16;
        let turns = (self.head / HEAD).round();
        (-turns).mul_add(HEAD, self.head) - turns * TAIL + self.tail
    }
}

/// What was read so far.
pub struct Builder {
    keep: Keep,
    blocks: Vec<Block>,
    list: Vec<Rotation>,
    clifford: Clifford,
    /// Where the state of each qubit of the file is in the order of the start: T undone.
    slots: Vec<u32>,
    given: Sum,
    gathered: Sum,
    eighths: u8,
    /// Rotations of gates with an angle that were multiples of π/4: diagonal ones and others.
    pub turned: [u64; 2],
}

/// The nearest multiple of π/4, if the angle is as close as rounding explains: 4 units in the last place.
fn eighths(angle: f64) -> Option<u8> {
    let turns = (angle / FRAC_PI_4).round();
    let near =
        turns != 0.0 && turns.abs() < 1e6 && (angle - turns * FRAC_PI_4).abs() <= 4.0 * f64::EPSILON * angle.abs();
    near.then(|| (turns as i64).rem_euclid(8) as u8)
}

impl Builder {
    pub fn new(qubits: u32, keep: Keep) -> Self {
        Self {
            keep,
            blocks: vec![],
            list: vec![],
            clifford: Clifford::identity(qubits),
            slots: (0..qubits).collect(),
            given: Sum::default(),
            gathered: Sum::default(),
            eighths: 0,
            turned: [0, 0],
        }
    }

    pub fn qubits(&self) -> u32 {
        self.slots.len() as u32
    }

    /// An empty builder of the same kind.
    pub fn fresh(&self) -> Self {
        Self::new(self.qubits(), self.keep)
    }

    pub fn widen(&mut self, qubits: u32) {
        self.clifford.widen(qubits);
        self.slots.extend(self.slots.len() as u32..qubits);
    }

    /// A global phase that the file gives as such; never reduced.
    pub fn phase(&mut self, angle: f64) {
        self.given.add(angle);
    }

    /// The global phase of a gate, which counts modulo 2π.
    pub fn gate_phase(&mut self, angle: f64) {
        self.gathered.add(angle);
    }

    /// exp(-i angle P) on qubits of the file; `fixed` where the gate has no angle of its own.
    pub fn rotate(&mut self, string: PauliString, angle: f64, fixed: bool) {
        let string = move_string(string, &self.slots);
        if let Some(turns) = eighths(angle) {
            let kept = match self.keep {
                Keep::Everything => true,
                Keep::Nothing => false,
                Keep::Diagonal => !fixed && string.x == 0,
                Keep::Rotations => !fixed,
            };
            self.turned[usize::from(string.x != 0)] += u64::from(!fixed);
            if !kept {
                return self.clifford.turn(Turn { string, turns });
            }
        }
        let pulled = self.clifford.pull(string);
        self.list.push(Rotation { string: pulled.string, angle: if pulled.negative { -angle } else { angle } });
    }

    fn turn(&mut self, string: PauliString, turns: u8) {
        if self.keep == Keep::Everything {
            let turns = if turns > 4 { f64::from(turns) - 8.0 } else { f64::from(turns) };
            return self.rotate(string, turns * FRAC_PI_4, true);
        }
        self.clifford.turn(Turn { string: move_string(string, &self.slots), turns });
    }

    fn swap(&mut self, a: u32, b: u32) {
        if self.keep != Keep::Everything {
            return self.slots.swap(a as usize, b as usize);
        }
        // SWAP = e^{iπ/4} exp(-i π/4 (XX + YY + ZZ))
        let both = 1u128 << a | 1 << b;
        for (x, z) in [(both, 0), (both, both), (0, both)] {
            self.rotate(PauliString { x, z }, FRAC_PI_4, true);
        }
        self.eighths = (self.eighths + 1) & 7;
    }

    /// One step of a standard gate on these qubits, or the step that undoes it.
    pub fn step(&mut self, step: &Move, parameters: &[f64], on: &[u32], undo: bool) {
        let spread = |mask: u8| (0..3).filter(|bit| mask >> bit & 1 == 1).fold(0, |all, bit| all | 1u128 << on[bit]);
        let string = |x: u8, z: u8| PauliString { x: spread(x), z: spread(z) };
        let angle =
            |weights: &[f64; 5]| if undo { -weighted(weights, parameters) } else { weighted(weights, parameters) };
        let eighths = |turns: u8| if undo { (8 - turns) & 7 } else { turns };
        match step {
            Move::Quarter(x, z, turns) => self.turn(string(*x, *z), eighths(*turns)),
            Move::Eighths(turns) => self.eighths = (self.eighths + eighths(*turns)) & 7,
            Move::Swap(a, b) => self.swap(on[usize::from(*a)], on[usize::from(*b)]),
            Move::Phase(weights) => self.gate_phase(angle(weights)),
            Move::Angle(x, z, weights) => {
                let angle = angle(weights);
                if rotates(weights, parameters) {
                    self.rotate(string(*x, *z), angle, parameters.is_empty());
                }
            }
        }
    }

    /// A circuit on the same qubits, blocks and all.
    pub fn append(&mut self, next: &Rotations) {
        let pull = |string| self.clifford.pull(move_string(string, &self.slots));
        let blocks = mapped(next.blocks(), &pull);
        for block in blocks {
            match block {
                Block { body: Body::List(list), repeat: 1 } => self.list.extend_from_slice(&list),
                repeated => {
                    self.seal();
                    self.blocks.push(repeated);
                }
            }
        }
        self.given.add(next.phase());
        let Some(frame) = next.frame() else { return };
        for turn in frame.turns() {
            self.clifford.turn(Turn { string: move_string(turn.string, &self.slots), ..*turn });
        }
        self.eighths = (self.eighths + frame.eighths()) & 7;
        let back = inverted(frame.relabelling());
        self.slots = back.iter().map(|&qubit| self.slots[qubit as usize]).collect();
    }

    /// Appends what another builder read, as often as said.
    pub fn repeat(&mut self, body: Self, count: u64, place: Place) -> std::result::Result<(), Refusal> {
        self.turned = [0, 1].map(|which| self.turned[which].saturating_add(body.turned[which]));
        let refused = |error: crate::error::Error| place.refuse(format!("a loop of {count} repeats: {error}"));
        let mut once = body.finish().map_err(refused)?;
        self.widen(once.qubits().max(self.qubits()));
        if once.qubits() < self.qubits() {
            once = once.widened(self.qubits());
        }
        self.append(&once.times(count).map_err(refused)?);
        Ok(())
    }

    fn seal(&mut self) {
        if !self.list.is_empty() {
            let body = Body::List(std::mem::take(&mut self.list).into());
            self.blocks.push(Block { body, repeat: 1 });
        }
    }

    /// The circuit.
    ///
    /// # Errors
    /// A phase beyond what a float holds.
    pub fn finish(mut self) -> Result<Rotations> {
        self.seal();
        self.clifford.phase(self.eighths);
        let phase = self.given.value() + self.gathered.turned();
        let frame = Frame::new(self.clifford, inverted(&self.slots));
        Rotations::framed(self.slots.len() as u32, self.blocks, phase, frame)
    }
}
