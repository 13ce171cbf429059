//! Two or three commuting strings on one pair of qubits share their two-qubit gates.
//!
//! Distinct commuting strings on a pair differ on both qubits, so axes can be renamed to ZZ, XX, YY. With C the controlled
//! NOT from a to b and D the controlled Z,
//!
//! ```text
//! C Z_b C = Z_a Z_b,     C X_a C = X_a X_b,     C (X_a Z_b) C = -Y_a Y_b,     D X_a D = X_a Z_b.
//! ```
//!
//! So the circuit C, rotations about Z_b and X_a, C makes two of them with 2 two-qubit gates, and C, both rotations, D, the
//! rotation about -X_a, (D C)⁻¹ makes all three with 3, since (D C)⁻¹ = C D is a controlled -iY: one gate. Three is the
//! least for strengths in general (G. Vidal, C. M. Dawson, Phys. Rev. A 69, 010301 (2004)).
//! The rotations stand in the order of the list, and between them only gates on other qubits.

use super::gate::Gate;
use crate::pauli::PauliString;
use crate::rotations::Rotation;

/// Where a rotation stands in a group: its partners in the list, if any.
#[derive(Clone, Copy, Debug, Default)]
pub struct Role {
    /// The partner before.
    pub before: Option<u32>,
    /// The partner after.
    pub after: Option<u32>,
}

/// Finds groups of up to three distinct commuting rotations on one pair, with nothing else on the pair in between.
pub fn groups(list: &[Rotation], qubits: u32) -> Vec<Role> {
    let mut roles = vec![Role::default(); list.len()];
    let mut last: Vec<Option<u32>> = vec![None; qubits as usize];
    for (place, rotation) in list.iter().enumerate().take(u32::MAX as usize) {
        let support = rotation.string.support();
        if support.count_ones() == 2 {
            let (a, b) = (support.trailing_zeros() as usize, 127 - support.leading_zeros() as usize);
            if let Some(before) = last[a].filter(|_| last[a] == last[b])
                && joins(list, &roles, before as usize, rotation.string)
            {
                roles[before as usize].after = Some(place as u32);
                roles[place].before = Some(before);
            }
        }
        for qubit in (0..qubits as usize).filter(|qubit| support >> qubit & 1 == 1) {
            last[qubit] = Some(place as u32);
        }
    }
    roles
}

/// Whether a string joins the group whose last member stands at `before`.
fn joins(list: &[Rotation], roles: &[Role], before: usize, string: PauliString) -> bool {
    let mut members = 0;
    let mut place = Some(before as u32);
    while let Some(now) = place {
        let own = list[now as usize].string;
        if own.support() != string.support() || own == string || !own.commutes_with(string) {
            return false;
        }
        members += 1;
        place = roles[now as usize].before;
    }
    members < 3
}

/// A letter on one qubit: 1 for X, 2 for Y, 3 for Z, 0 for none.
pub fn letter(string: PauliString, qubit: u32) -> u8 {
    match (string.x >> qubit & 1, string.z >> qubit & 1) {
        (0, 0) => 0,
        (1, 0) => 1,
        (1, _) => 2,
        _ => 3,
    }
}

/// Renames axes on one qubit: gates in order of time whose product V takes `first` to ±Z and `second` to ±X.
///
/// Returns the gates and the signs of V first V†, V second V† and V third V† against Z, X and Y.
pub fn renaming(first: u8, second: u8, qubit: u16) -> (Vec<Gate>, [f64; 3]) {
    let (h, sdg) = (Gate::H(qubit), Gate::Sdg(qubit));
    let (gates, z, x) = match (first, second) {
        (1, 3) => (vec![h], 1.0, 1.0),
        (1, _) => (vec![h, sdg], 1.0, -1.0),
        (2, 1) => (vec![sdg, h, sdg], 1.0, 1.0),
        (2, _) => (vec![sdg, h], 1.0, 1.0),
        (_, 2) => (vec![sdg], 1.0, 1.0),
        _ => (vec![], 1.0, 1.0),
    };
    // Y = i X Z keeps its handedness: the third axis turns round where the first two stand the other way round.
    let handed = if matches!((first, second), (3, 1) | (1, 2) | (2, 3)) { 1.0 } else { -1.0 };
    (gates, [z, x, z * x * handed])
}
