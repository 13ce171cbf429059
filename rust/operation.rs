//! Rotations that act as one.
//!
//! Commuting strings with the same x mask send every index to the same partner. So with `s_j = ±1`, the sign that string j
//! has at an index,
//!
//! ```text
//! exp(-i Σ_j θ_j P_j) = cos H - i sin H · P,   H = Σ_j θ_j s_j,
//! ```
//!
//! one rotation whose angle depends on a few parities of the index. Eight strings of a fermionic double excitation cost
//! one; XX and YY on a bond cost one. ZZ on the same bond only adds a phase by the parity that XX and YY see too, so a
//! whole bond costs one. Worked example on three qubits, bond 0-1: where qubits 0 and 1 agree (000, 011, 100, 111),
//! XX = 1 on the pair and YY = -1, so equal strengths leave H = 0 and only ZZ acts, by a phase; where they differ
//! (001 ↔ 010, 101 ↔ 110) H = 2θ. Take that phase out of everything, and half of the amplitudes are not touched at all.
//!
//! Diagonal strings commute with one another: a run of them is one operation, however long.

use num_complex::Complex64;

use crate::rotations::Rotation;

/// How far back a partner is looked for.
const LOOK_BACK: usize = 64;
/// Parities that the angle of one operation may depend on.
pub const PARITIES: usize = 4;

/// exp(-i Σ θ_j P_j) of strings that commute: those that mix share one x mask, the others are diagonal.
#[derive(Clone, Debug, Default)]
pub struct Operation {
    /// Strings with x ≠ 0.
    pub mixing: Vec<Rotation>,
    /// Strings with x = 0; beside mixing ones, only the string whose parity tells their angles apart.
    pub diagonal: Vec<Rotation>,
    /// Sum of |θ_1| + |θ_2| over the equal strings that merged.
    merged: f64,
}

impl Operation {
    fn of(rotation: Rotation) -> Self {
        let mut operation = Self::default();
        operation.take(rotation);
        operation
    }

    fn list_for(&mut self, rotation: &Rotation) -> &mut Vec<Rotation> {
        if rotation.string.x == 0 { &mut self.diagonal } else { &mut self.mixing }
    }

    /// The x mask.
    pub fn x(&self) -> u64 {
        self.mixing.first().map_or(0, |rotation| rotation.string.x as u64)
    }

    /// How many rotations it stands for.
    pub fn count(&self) -> usize {
        self.mixing.len() + self.diagonal.len()
    }

    fn rotations(&self) -> impl Iterator<Item = &Rotation> {
        self.mixing.iter().chain(&self.diagonal)
    }

    fn commutes_with(&self, rotation: &Rotation) -> bool {
        self.rotations().all(|own| own.string.commutes_with(rotation.string))
    }

    /// Whether all strings of one commute with all of the other.
    pub fn commutes_with_all_of(&self, other: &Self) -> bool {
        if self.mixing.is_empty() && other.mixing.is_empty() {
            return true;
        }
        other.rotations().all(|rotation| self.commutes_with(rotation))
    }

    /// Whether the diagonal string of `mask` belongs to the bond of the mixing strings: they depend on its parity at most,
    /// and it is that of their own YY. Strings elsewhere that only commute are cheaper in a diagonal operation.
    fn is_bond_of(&self, mask: u128) -> bool {
        let fits = |r: &Rotation| (r.string.z == 0 || r.string.z == mask) && r.string.y_count() & 1 == 0;
        (self.x() as u128 == mask || self.mixing.iter().any(|r| r.string.z == mask))
            && self.mixing.iter().all(fits)
            && self.diagonal.iter().all(|r| r.string.z == mask)
            && (self.x() as u128 & mask).count_ones() & 1 == 0
    }

    /// Whether sums of the angles stay finite, a bond's twice over: huge angles stay apart rather than overflow.
    fn fits(&self, rotation: &Rotation) -> bool {
        (4.0 * self.rotations().map(|own| own.angle.abs()).chain([rotation.angle.abs()]).sum::<f64>()).is_finite()
    }

    fn admits(&self, rotation: &Rotation) -> bool {
        if !self.fits(rotation) {
            return false;
        }
        let string = rotation.string;
        match (self.mixing.first(), string.x) {
            (None, 0) => true,
            (None, _) => false,
            (Some(_), 0) => self.is_bond_of(string.z),
            (Some(first), x) if first.string.x == x && self.commutes_with(rotation) => match self.diagonal.first() {
                Some(phase) => string.z == 0 || string.z == phase.string.z,
                None => {
                    let masks = self.mixing.iter().map(|own| own.string.z as u64).chain([string.z as u64]);
                    independent(masks).len() <= PARITIES
                }
            },
            _ => false,
        }
    }

    fn take(&mut self, rotation: Rotation) {
        let list = self.list_for(&rotation);
        match list.iter_mut().find(|own| own.string == rotation.string) {
            Some(own) => {
                let sizes = own.angle.abs() + rotation.angle.abs();
                own.angle += rotation.angle;
                self.merged += sizes;
            }
            None => list.push(rotation),
        }
    }

    /// What the operation does, in numbers.
    pub fn action(&self) -> Action {
        let Some(first) = self.mixing.first() else {
            return Action::Diagonal(self.diagonal.iter().map(|r| (r.string.z as u64, r.angle)).collect());
        };
        let real = first.string.y_count() & 1 == 1;
        let x = first.string.x as u64;
        let masks = independent(self.mixing.iter().map(|r| r.string.z as u64));
        match self.diagonal.first() {
            None if self.mixing.len() == 1 && has_small_tangent(first.angle) => {
                let (sin, cos) = libm::sincos(first.angle);
                let tangent = sin / cos * sign_at_zero(first);
                Action::Turn { real, mask: first.string.z as u64, tangent, cosine: cos }
            }
            None => {
                let entry = |parities: usize| {
                    let (sin, cos) = libm::sincos(self.angle(&masks, parities));
                    (cos, sin)
                };
                let entries = (0..1 << masks.len()).map(entry).collect();
                Action::Table { real, masks, entries }
            }
            Some(phase) => self.bond(x, phase),
        }
    }

    /// Bounds for one application to a unit vector: the 2-norm of the rounding error in units of the roundoff of amplitudes,
    /// and that of adding up angles in units of the roundoff of doubles. `docs/engine.md` derives the numbers.
    pub fn rounding(&self) -> (f64, f64) {
        let units = match self.action() {
            Action::Diagonal(terms) => 5.0 * terms.len() as f64,
            Action::Exchange { .. } => 18.0,
            Action::Bond { .. } => 21.0,
            Action::Turn { .. } => 8.0,
            Action::Table { .. } => 5.0,
            Action::Complex { .. } => 10.0,
        };
        // Angles of mixing strings are added up, those of diagonal strings become phases one by one.
        let sums = if self.mixing.is_empty() { 0 } else { self.count() - 1 };
        let angles: f64 = self.rotations().map(|rotation| rotation.angle.abs()).sum();
        (units, self.merged + sums as f64 * angles)
    }

    /// H where the parities of the index with `masks` are the bits of `parities`.
    fn angle(&self, masks: &[u64], parities: usize) -> f64 {
        self.mixing
            .iter()
            .map(|rotation| {
                let odd = coordinates(masks, rotation.string.z as u64) & parities;
                let sign = sign_at_zero(rotation);
                rotation.angle * if odd.count_ones() & 1 == 1 { -sign } else { sign }
            })
            .sum()
    }

    fn bond(&self, x: u64, phase: &Rotation) -> Action {
        let mask = phase.string.z as u64;
        debug_assert!(x & mask != x || x.count_ones() & 1 == 0);
        let masks = [mask];
        let (even, odd, turn) = (self.angle(&masks, 0), self.angle(&masks, 1), phase.angle);
        let unit = |angle: f64| {
            let (sin, cos) = libm::sincos(angle);
            Complex64::new(cos, sin)
        };
        if even == 0.0 && 2.0 * turn == odd {
            let gamma = 0.5 * (Complex64::new(1.0, 0.0) - unit(2.0 * turn + odd));
            return Action::Exchange { mask, gamma, factor: unit(-turn) };
        }
        let (sin, cos) = libm::sincos(even);
        if sin.abs() <= cos.abs() {
            let scale = 0.5 / cos;
            let (plus, minus) = (unit(2.0 * turn - odd) * scale, unit(2.0 * turn + odd) * scale);
            return Action::Bond { mask, plus, minus, tangent: sin / cos, factor: unit(-turn) * cos };
        }
        let entry = |angle: f64, turn: f64| {
            let (sin, cos) = libm::sincos(angle);
            (unit(turn) * cos, unit(turn) * Complex64::new(0.0, -sin))
        };
        Action::Complex { mask, entries: [entry(even, -turn), entry(odd, turn)] }
    }
}

/// Whether |tan| is at most 1, by the portable sine and cosine.
fn has_small_tangent(angle: f64) -> bool {
    let (sin, cos) = libm::sincos(angle);
    sin.abs() <= cos.abs()
}

/// The sign of -i θ P at index 0 once the factor -i (or 1, for an odd number of Y) is taken out: P sends amplitude `k ^ x` to
/// k with `i^y (-1)^{parity of (k ^ x) & z}`.
pub fn sign_at_zero(rotation: &Rotation) -> f64 {
    let string = rotation.string;
    let turns = string.y_count() / 2 + (string.x & string.z).count_ones();
    if turns & 1 == 1 { -1.0 } else { 1.0 }
}

/// What an operation does to amplitude a at index k and to its partner b at `k ^ x`.
#[derive(Clone, Debug, PartialEq)]
pub enum Action {
    /// Phases exp(-i θ (-1)^{parity of k & z}) for pairs (z, θ).
    Diagonal(Vec<(u64, f64)>),
    /// factor · (a + γ (b - a)) where the parity of `k & mask` is odd, factor · a where it is even.
    Exchange {
        /// Mask of the parity.
        mask: u64,
        /// γ.
        gamma: Complex64,
        /// Factor of everything.
        factor: Complex64,
    },
    /// factor · (plus (a + b) + minus (a - b)) where the parity is odd, factor · (a - i tangent b) where it is even.
    Bond {
        /// Mask of the parity.
        mask: u64,
        /// Factor of the sum.
        plus: Complex64,
        /// Factor of the difference.
        minus: Complex64,
        /// Tangent of the even angle.
        tangent: f64,
        /// Factor of everything.
        factor: Complex64,
    },
    /// cosine · (a + w t b): t = ± tangent by the parity of `k & mask`, w = 1 if `real`, else -i.
    Turn {
        /// Whether the partner enters with a real factor.
        real: bool,
        /// Mask of the sign.
        mask: u64,
        /// t where the parity is even.
        tangent: f64,
        /// Factor of everything.
        cosine: f64,
    },
    /// c a + w s b, where bit j of the place in `entries` is the parity of `k & masks[j]`, w = 1 if `real`, else -i.
    Table {
        /// Whether the partner enters with a real factor.
        real: bool,
        /// Masks of the parities.
        masks: Vec<u64>,
        /// (c, s) by parities.
        entries: Vec<(f64, f64)>,
    },
    /// c a + s b by the parity of `k & mask`.
    Complex {
        /// Mask of the parity.
        mask: u64,
        /// (c, s) for even and odd parity.
        entries: [(Complex64, Complex64); 2],
    },
}

/// A largest independent subset over GF(2), in order of appearance.
pub fn independent(masks: impl Iterator<Item = u64>) -> Vec<u64> {
    let (mut kept, mut reduced): (Vec<u64>, Vec<u64>) = (vec![], vec![]);
    for mask in masks {
        let rest = reduced.iter().fold(mask, |rest, own| rest.min(rest ^ own));
        if rest != 0 {
            reduced.push(rest);
            reduced.sort_unstable_by(|a, b| b.cmp(a));
            kept.push(mask);
        }
    }
    kept
}

/// Which of the independent `masks` add up to `mask`, as bits.
pub fn coordinates(masks: &[u64], mask: u64) -> usize {
    let sum =
        |choice: usize| masks.iter().enumerate().fold(0, |s, (j, m)| if choice >> j & 1 == 1 { s ^ m } else { s });
    (0..1usize << masks.len()).find(|&choice| sum(choice) == mask).unwrap_or(0)
}

/// Joins rotations where the order of the list allows.
pub fn joined(list: &[Rotation]) -> Vec<Operation> {
    let mut operations: Vec<Operation> = Vec::with_capacity(list.len());
    for &rotation in list {
        match partner(&operations, &rotation) {
            Some(place) => operations[place].take(rotation),
            None => operations.push(Operation::of(rotation)),
        }
    }
    complete_bonds(&mut operations);
    operations.retain(|operation| operation.count() > 0);
    operations
}

/// The nearest earlier operation that the rotation may join: it commutes with all in between.
fn partner(operations: &[Operation], rotation: &Rotation) -> Option<usize> {
    for (place, operation) in operations.iter().enumerate().rev().take(LOOK_BACK) {
        if operation.admits(rotation) {
            return Some(place);
        }
        if !operation.commutes_with(rotation) {
            return None;
        }
    }
    None
}

/// Moves ZZ strings out of diagonal runs to the XX and YY of their bonds, where nothing stands between.
fn complete_bonds(operations: &mut [Operation]) {
    for place in 0..operations.len() {
        let bond = &operations[place];
        let masks = independent(bond.mixing.iter().map(|r| r.string.z as u64));
        let &[mask] = &masks[..] else { continue };
        if !bond.diagonal.is_empty() || bond.mixing.len() < 2 || !bond.is_bond_of(u128::from(mask)) {
            continue;
        }
        let before = (place.saturating_sub(LOOK_BACK)..place).rev();
        let after = place + 1..operations.len().min(place + LOOK_BACK);
        let found = [nearest(operations, before, mask), nearest(operations, after, mask)].into_iter().flatten().next();
        let fits = |&(from, which): &(usize, usize)| operations[place].fits(&operations[from].diagonal[which]);
        if let Some((from, which)) = found.filter(fits) {
            let phase = operations[from].diagonal.swap_remove(which);
            operations[place].take(phase);
        }
    }
}

/// The first place, and the place in it, of the diagonal string `mask` that commutes with all passed on the way.
fn nearest(operations: &[Operation], way: impl Iterator<Item = usize>, mask: u64) -> Option<(usize, usize)> {
    for place in way {
        let operation = &operations[place];
        if operation.mixing.is_empty() {
            if let Some(which) = operation.diagonal.iter().position(|r| r.string.z as u64 == mask) {
                return Some((place, which));
            }
        } else if operation.mixing.iter().any(|r| (r.string.x as u64 & mask).count_ones() & 1 == 1) {
            return None;
        }
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::pauli::PauliString;

    fn rotation(x: u128, z: u128, angle: f64) -> Rotation {
        Rotation { string: PauliString { x, z }, angle }
    }

    fn counts(list: &[Rotation]) -> Vec<usize> {
        joined(list).iter().map(Operation::count).collect()
    }

    #[test]
    fn xx_and_yy_on_a_bond_join_and_act_where_the_qubits_differ() {
        let found = joined(&[rotation(0b11, 0, 0.5), rotation(0b11, 0b11, 0.5)]);
        let Action::Table { real: false, masks, entries } = found[0].action() else { panic!("a table was due") };
        assert_eq!((masks, entries[0]), (vec![0b11], (1.0, 0.0)));
        assert_eq!(entries[1], (1.0_f64.cos(), 1.0_f64.sin()));
    }

    #[test]
    fn a_whole_bond_is_one_operation_in_either_order() {
        let bond = [rotation(0b11, 0, 0.5), rotation(0b11, 0b11, 0.5), rotation(0, 0b11, 0.5)];
        let reversed: Vec<_> = bond.iter().rev().copied().collect();
        for list in [&bond[..], &reversed] {
            let found = joined(list);
            assert_eq!(found.len(), 1);
            assert!(matches!(found[0].action(), Action::Exchange { mask: 0b11, .. }));
        }
        let unequal = [rotation(0b11, 0, 0.5), rotation(0b11, 0b11, 0.4), rotation(0, 0b11, 0.3)];
        assert!(matches!(joined(&unequal)[0].action(), Action::Bond { .. }));
    }

    #[test]
    fn many_strings_of_one_x_mask_join_up_to_four_parities() {
        let strings: Vec<_> = [0u128, 0b0011, 0b0101, 0b1001, 0b0110, 0b1010, 0b1100, 0b1111]
            .iter()
            .map(|z| rotation(0b1111, *z, 0.1))
            .collect();
        assert_eq!(counts(&strings), [8]);
        let wide: Vec<_> = (0..6).map(|j| rotation(1, 1 << (j + 1), 0.1)).collect();
        assert_eq!(counts(&wide), [4, 2]);
    }

    #[test]
    fn equal_strings_add_their_angles() {
        let found = joined(&[rotation(1, 0, 0.25), rotation(2, 0, 0.5), rotation(1, 0, 0.5)]);
        assert_eq!(found[0].mixing, [rotation(1, 0, 0.75)]);
    }

    #[test]
    fn angles_whose_sum_overflows_stay_apart() {
        assert_eq!(joined(&[rotation(0b11, 0, 1e308), rotation(0b11, 0b11, 1e308)]).len(), 2);
        for sizes in [[5e307; 3], [0.8e308, 0.7e308, 1.2e308], [1e306, 1e306, 1.2e308]] {
            let list = [rotation(0b11, 0, sizes[0]), rotation(0b11, 0b11, sizes[1]), rotation(0, 0b11, sizes[2])];
            let mut state = vec![num_complex::Complex64::new(0.5, 0.0); 4];
            let circuit = crate::rotations::Rotations::from_list(2, list.to_vec(), 0.0).unwrap();
            crate::evolve::evolve(&mut state, &circuit, 1, &Default::default()).unwrap();
            assert!(state.iter().all(|a| a.is_finite()), "{sizes:?}");
        }
    }

    #[test]
    fn nothing_moves_past_what_it_anticommutes_with() {
        assert_eq!(counts(&[rotation(0b11, 0, 0.5), rotation(0, 0b10, 0.1), rotation(0b11, 0b11, 0.2)]), [1, 1, 1]);
        assert_eq!(counts(&[rotation(0b11, 0, 0.5), rotation(0b11000, 0, 0.1), rotation(0b11, 0b11, 0.2)]), [2, 1]);
        assert_eq!(counts(&[rotation(0, 0b1, 0.5), rotation(0b1, 0, 0.1), rotation(0, 0b1, 0.2)]), [1, 1, 1]);
    }
}
