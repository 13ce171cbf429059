//! A Clifford written as quarter turns, one string of half a turn, and a phase.
//!
//! Multiplied from the right, C exp(-i π/4 P), a quarter turn changes each row r = C† Q C that anticommutes with P into i P r.
//! So a row a becomes a chosen string c that anticommutes with it by the one turn P ∝ a c, and any c by two turns, by way
//! of a string that anticommutes with both. Qubit by qubit X_q and Z_q are brought home, with turns that leave the qubits
//! before at home: at most four turns a qubit. What is left flips signs, and is one Pauli string.

use super::{Clifford, Signed, Turn, bits, single};
use crate::pauli::PauliString;

impl Clifford {
    /// Turns, first in time first, and a phase in multiples of π/4 whose product is this operator.
    ///
    /// At most 4 n + 1 turns; the same ones for operators that differ in phase only.
    pub fn turns(&self) -> (Vec<Turn>, u8) {
        let mut rows = self.rows.clone();
        let mut undone: Vec<Turn> = Vec::new();
        for qubit in 0..rows.len() {
            let [home_x, home_z] = single(qubit).map(|row| row.string);
            let x = rows[qubit][0].string;
            if x != home_x {
                if x.commutes_with(home_x) {
                    let way = between(x, qubit);
                    step(&mut rows, &mut undone, x, way);
                    step(&mut rows, &mut undone, way, home_x);
                } else {
                    step(&mut rows, &mut undone, x, home_x);
                }
            }
            let z = rows[qubit][1].string;
            if z != home_z {
                if z.commutes_with(home_z) {
                    // It carries Z on this qubit, so Y is between: the turns then commute with X, which stays at home.
                    let way = PauliString { x: 1 << qubit, z: 1 << qubit };
                    step(&mut rows, &mut undone, z, way);
                    step(&mut rows, &mut undone, way, home_z);
                } else {
                    step(&mut rows, &mut undone, z, home_z);
                }
            }
        }
        // C V_1 ⋯ V_m = ± a Pauli string; so C = that string · V_m† ⋯ V_1†.
        let mut turns: Vec<Turn> = undone.into_iter().map(Turn::inverse).collect();
        let signs = rows.iter().enumerate().fold(PauliString::IDENTITY, |signs, (qubit, [x, z])| PauliString {
            x: signs.x | u128::from(z.negative) << qubit,
            z: signs.z | u128::from(x.negative) << qubit,
        });
        if signs != PauliString::IDENTITY {
            turns.push(Turn { string: signs, turns: 2 });
        }
        let mut made = Self::identity(self.qubits());
        turns.iter().for_each(|&turn| made.turn(turn));
        debug_assert_eq!(made.rows, self.rows);
        let phase = self.witness.phase_against(&made.witness).unwrap_or(0);
        (turns, phase)
    }

    /// The operator that undoes this one.
    pub fn inverse(&self) -> Self {
        let (turns, phase) = self.turns();
        let mut made = Self::identity(self.qubits());
        turns.iter().rev().for_each(|turn| made.turn(turn.inverse()));
        made.phase(8 - phase);
        made
    }
}

/// A string on this qubit and later ones that anticommutes with `string` and with X there, where those two commute.
fn between(string: PauliString, qubit: usize) -> PauliString {
    let z_here = PauliString { x: 0, z: 1 << qubit };
    if string.x >> qubit & 1 == 1 {
        return z_here;
    }
    let other = bits(string.support()).next().unwrap_or(qubit);
    let (x, z) = if string.x >> other & 1 == 1 { (0, 1 << other) } else { (1 << other, 0) };
    PauliString { x, z: z | z_here.z }
}

/// Multiplies by the quarter turn that makes `from` a multiple of `to`, which anticommutes with it.
fn step(rows: &mut [[Signed; 2]], done: &mut Vec<Turn>, from: PauliString, to: PauliString) {
    let (string, _) = from.times(to);
    let turn = Signed::plus(string);
    for row in rows.iter_mut().flatten() {
        if !row.string.commutes_with(string) {
            *row = turn.times(*row, 1);
        }
    }
    done.push(Turn { string, turns: 1 });
}
