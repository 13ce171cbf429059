//! One rotation, or two that act as one.
//!
//! Two commuting strings with the same x mask differ by a diagonal string: P_2 = ±P_1 Z^d with d = z_1 ^ z_2. So
//!
//! ```text
//! exp(-i (α P_1 + β P_2)) = cos(α ± σ β) - i sin(α ± σ β) P_1,   σ = (-1)^{parity of the index & d},
//! ```
//!
//! one rotation whose angle depends on a parity that both partners of a pair share. XX and YY on a bond are the common
//! case: α + β where the two qubits differ, α - β where they agree. Joining them halves the work of a Heisenberg step.

use crate::pauli::PauliString;
use crate::rotations::Rotation;

/// How far back a partner is looked for.
const LOOK_BACK: usize = 64;

/// exp(-i (first.angle P_1 + second.angle P_2)), the second with the same x mask as the first and commuting with it.
#[derive(Clone, Copy, Debug)]
pub struct Operation {
    /// The only or the first rotation.
    pub first: Rotation,
    /// The one that joined it.
    pub second: Option<Rotation>,
}

impl Operation {
    /// The x mask.
    pub fn x(&self) -> u128 {
        self.first.string.x
    }

    /// Whether the operation commutes with a string, term by term.
    pub fn commutes_with(&self, string: PauliString) -> bool {
        self.strings().all(|own| own.commutes_with(string))
    }

    /// Whether all strings of one commute with all of the other.
    pub fn commutes_with_all_of(&self, other: &Self) -> bool {
        other.strings().all(|string| self.commutes_with(string))
    }

    fn strings(&self) -> impl Iterator<Item = PauliString> {
        [Some(self.first.string), self.second.map(|second| second.string)].into_iter().flatten()
    }

    /// The mask d whose parity tells the two angles apart, 0 where there is one rotation.
    pub fn parity_mask(&self) -> u128 {
        self.second.map_or(0, |second| self.first.string.z ^ second.string.z)
    }

    /// The angle where the parity of `index & parity_mask` is even, and where it is odd.
    pub fn angles(&self) -> [f64; 2] {
        let Some(second) = self.second else {
            return [self.first.angle; 2];
        };
        // i^{y_2} X^x Z^{z_2} = i^{y_2 - y_1} (i^{y_1} X^x Z^{z_1}) Z^d; commuting strings have y_2 - y_1 even.
        let turns = second.string.y_count() + 3 * self.first.string.y_count();
        let signed = if turns & 2 == 0 { second.angle } else { -second.angle };
        [self.first.angle + signed, self.first.angle - signed]
    }
}

/// Joins rotations in pairs where the order of the list allows; diagonal ones stay single.
pub fn joined(list: &[Rotation]) -> Vec<Operation> {
    let mut operations: Vec<Operation> = Vec::with_capacity(list.len());
    for &rotation in list {
        match partner(&operations, &rotation) {
            Some(place) => operations[place].second = Some(rotation),
            None => operations.push(Operation { first: rotation, second: None }),
        }
    }
    operations
}

/// The nearest earlier operation that the rotation may join: it commutes with that one and with all in between.
fn partner(operations: &[Operation], rotation: &Rotation) -> Option<usize> {
    if rotation.string.x == 0 {
        return None;
    }
    for (place, operation) in operations.iter().enumerate().rev().take(LOOK_BACK) {
        if !operation.commutes_with(rotation.string) {
            return None;
        }
        if operation.x() == rotation.string.x && operation.second.is_none() {
            // Two huge angles stay apart rather than overflow.
            return (operation.first.angle.abs() + rotation.angle.abs()).is_finite().then_some(place);
        }
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;

    fn rotation(x: u128, z: u128, angle: f64) -> Rotation {
        Rotation { string: PauliString { x, z }, angle }
    }

    #[test]
    fn xx_and_yy_on_a_bond_join_and_their_angles_follow_the_parity() {
        let found = joined(&[rotation(0b11, 0, 0.5), rotation(0b11, 0b11, 0.2)]);
        assert_eq!(found.len(), 1);
        assert_eq!(found[0].parity_mask(), 0b11);
        // YY = -XX ZZ: the angles subtract where ZZ = +1.
        assert_eq!(found[0].angles(), [0.3, 0.7]);
    }

    #[test]
    fn angles_whose_sum_overflows_stay_apart() {
        assert_eq!(joined(&[rotation(0b11, 0, 1e308), rotation(0b11, 0b11, 1e308)]).len(), 2);
    }

    #[test]
    fn nothing_moves_past_what_it_anticommutes_with() {
        let found = joined(&[rotation(0b11, 0, 0.5), rotation(0b110, 0, 0.1), rotation(0b11, 0b11, 0.2)]);
        assert_eq!(found.len(), 3);
        let apart = joined(&[rotation(0b11, 0, 0.5), rotation(0b11000, 0, 0.1), rotation(0b11, 0b11, 0.2)]);
        assert_eq!(apart.len(), 2);
    }
}
