//! A state C|0…0> with its exact phase: what the phase of a Clifford is read from.
//!
//! ```text
//! |ψ> = ω^phase 2^{-k/2} Σ_u i^{Σ_j l_j u_j + 2 Σ_{j<m} Q_jm u_j u_m} |A u + b>,    ω = e^{iπ/4}
//! ```
//!
//! over k bits u, with the columns of A in reduced echelon form: each variable is named by its pivot, a bit that its own
//! column alone has, so the variables of a vector in the span are read off its pivots. A quarter turn (1 - i P)/√2 sends
//! |Au + b> to itself and to |Au + b + x>. Where x is not in the span, that is one variable more. Where x = A w, the two
//! meet at the same basis states with a ratio i^e (-1)^{a·u}: for odd e their sum is a phase i^{±(a·u mod 2)}, which is
//! quadratic in u; for even e it is a projector on one value of a·u, one variable less. So the form is kept with all phases
//! multiples of π/4. A turn costs k operations on masks, more where a variable is exchanged.

use super::bits;
use crate::pauli::PauliString;

#[derive(Clone, Copy, Debug, Default)]
struct Variable {
    column: u128,
    linear: u8,
    pairs: u128,
}

/// The state; see the head of this file.
#[derive(Clone, Debug, Default)]
pub struct Witness {
    shift: u128,
    active: u128,
    variables: Vec<Variable>,
    phase: u8,
}

fn odd(mask: u128) -> u8 {
    (mask.count_ones() & 1) as u8
}

impl Witness {
    pub fn shift_phase(&mut self, eighths: u8) {
        self.phase = (self.phase + eighths) & 7;
    }

    /// Applies exp(-i π/4 turns P).
    pub fn turn(&mut self, string: PauliString, turns: u8) {
        let turns = if turns & 4 == 4 {
            self.shift_phase(4);
            turns & 3
        } else {
            turns
        };
        match turns {
            1 => self.quarter(string, false),
            2 => self.half(string),
            3 => {
                // exp(-i 3π/4 P) = -exp(i π/4 P)
                self.shift_phase(4);
                self.quarter(string, true);
            }
            _ => {}
        }
    }

    /// Applies -i P.
    fn half(&mut self, PauliString { x, z }: PauliString) {
        for place in bits(self.active) {
            let variable = &mut self.variables[place];
            variable.linear = (variable.linear + 2 * odd(z & variable.column)) & 3;
        }
        let y = (x & z).count_ones() as u8;
        self.shift_phase((2 * (y & 3) + 4 * odd(z & self.shift) + 6) & 7);
        self.shift ^= x;
    }

    /// Applies (1 - i P)/√2, or (1 + i P)/√2.
    fn quarter(&mut self, PauliString { x, z }: PauliString, negative: bool) {
        let shared = x & self.active;
        let spanned = bits(shared).fold(0, |sum, place| sum ^ self.variables[place].column);
        let factor = if negative { 1 } else { 3 };
        let y = (x & z).count_ones() as u8;
        if spanned != x {
            let linear = (factor + y + 2 * odd(z & self.shift)) & 3;
            self.add_variable(x, z, linear, shared);
            return;
        }
        let mut ratio = factor + (y & 3) + 2 * odd(z & (x ^ self.shift));
        let mut parity = 0u128;
        let mut inside = 0u32;
        for place in bits(self.active) {
            let Variable { column, linear, pairs } = self.variables[place];
            let chosen = shared >> place & 1 == 1;
            if chosen {
                ratio = (ratio + linear) & 3;
                inside += (pairs & shared).count_ones();
            }
            let sign = (u8::from(chosen) & linear) ^ odd(pairs & shared) ^ odd(z & column);
            parity |= u128::from(sign & 1) << place;
        }
        // Each pair inside was met from both of its ends.
        ratio = (ratio + 2 * ((inside / 2) as u8 & 1)) & 3;
        match ratio {
            1 => {
                self.shift_phase(1);
                self.add_parity(parity, 3);
            }
            3 => {
                self.shift_phase(7);
                self.add_parity(parity, 1);
            }
            even => self.project(parity, even == 2),
        }
    }

    /// Adds the variable t with |A u + b + x t>, phase i^{linear t} and a sign (-1)^{z·Au t}.
    fn add_variable(&mut self, x: u128, z: u128, linear: u8, shared: u128) {
        let reduced = bits(shared).fold(x, |sum, place| sum ^ self.variables[place].column);
        let place = reduced.trailing_zeros() as usize;
        if self.variables.len() <= place {
            self.variables.resize(place + 1, Variable::default());
        }
        let mut pairs = 0;
        let mut holders = 0;
        for other in bits(self.active) {
            let variable = &mut self.variables[other];
            if odd(z & variable.column) == 1 {
                pairs |= 1 << other;
                variable.pairs ^= 1 << place;
            }
            holders |= (variable.column >> place & 1) << other;
        }
        self.variables[place] = Variable { column: x, linear, pairs };
        self.active |= 1 << place;
        for other in bits(shared) {
            self.substitute(other, 1 << place, false);
        }
        self.substitute(place, holders, false);
    }

    /// Multiplies by i^{power (mask·u mod 2)} for an odd power.
    fn add_parity(&mut self, mask: u128, power: u8) {
        // The parity of a sum of bits is Σ u_m - 2 Σ_{m<n} u_m u_n modulo 4.
        for place in bits(mask) {
            let variable = &mut self.variables[place];
            variable.linear = (variable.linear + power) & 3;
            variable.pairs ^= mask & !(1 << place);
        }
    }

    /// Keeps the part with mask·u = value, at √2 its length.
    fn project(&mut self, mask: u128, value: bool) {
        debug_assert!(mask != 0, "a unitary keeps the norm");
        if mask == 0 {
            return;
        }
        let place = mask.trailing_zeros() as usize;
        self.substitute(place, mask & !(1 << place), value);
        // The variable is 0 now.
        let gone = std::mem::take(&mut self.variables[place]);
        self.active &= !(1 << place);
        for other in bits(gone.pairs) {
            self.variables[other].pairs &= !(1 << place);
        }
    }

    /// Writes u_place as u_place ⊕ mask·u ⊕ flip.
    fn substitute(&mut self, place: usize, mask: u128, flip: bool) {
        let Variable { column, linear, pairs } = self.variables[place];
        let own = 1u128 << place;
        // Columns: A u + b.
        for other in bits(mask) {
            self.variables[other].column ^= column;
        }
        if flip {
            self.shift ^= column;
        }
        // Pairs of u_place: 2 u_m (u_place ⊕ s) = 2 u_m u_place + 2 u_m s modulo 4.
        for other in bits(pairs) {
            self.variables[other].pairs ^= mask;
            if (mask >> other & 1 == 1) != flip {
                self.variables[other].linear = (self.variables[other].linear + 2) & 3;
            }
        }
        for other in bits(mask) {
            self.variables[other].pairs ^= pairs;
        }
        // The linear part: l (u ⊕ s) = l u + l s - 2 l u s, and s = parity or 1 - parity.
        let share = if flip {
            self.shift_phase((2 * linear) & 7);
            (4 - linear) & 3
        } else {
            linear
        };
        for other in bits(mask) {
            let variable = &mut self.variables[other];
            variable.linear = (variable.linear + share) & 3;
            if linear & 1 == 1 {
                variable.pairs ^= (mask & !(1 << other)) ^ own;
            }
        }
        if linear & 1 == 1 {
            let variable = &mut self.variables[place];
            variable.pairs ^= mask;
            if flip {
                variable.linear = (variable.linear + 2) & 3;
            }
        }
    }

    /// The phase of the amplitude of a basis state, in multiples of π/4; None where the amplitude is 0.
    fn phase_at(&self, index: u128) -> Option<u8> {
        let offset = index ^ self.shift;
        let chosen = offset & self.active;
        if bits(chosen).fold(0, |sum, place| sum ^ self.variables[place].column) != offset {
            return None;
        }
        let mut quarters = 0u32;
        let mut inside = 0u32;
        for place in bits(chosen) {
            quarters += u32::from(self.variables[place].linear);
            inside += (self.variables[place].pairs & chosen).count_ones();
        }
        Some(((u32::from(self.phase) + 2 * (quarters + inside)) & 7) as u8)
    }

    /// The phase of this state over that of another one which equals it up to a phase; None where it cannot.
    pub fn phase_against(&self, other: &Self) -> Option<u8> {
        Some((self.phase + 8 - other.phase_at(self.shift)?) & 7)
    }

    /// The state with the bits of its indices renamed by a permutation.
    pub fn relabelled(&self, moved: &impl Fn(u128) -> u128) -> Self {
        let mut made =
            Self { shift: moved(self.shift), active: moved(self.active), variables: vec![], phase: self.phase };
        made.variables.resize(128 - made.active.leading_zeros() as usize, Variable::default());
        for place in bits(self.active) {
            let Variable { column, linear, pairs } = self.variables[place];
            let target = moved(1 << place).trailing_zeros() as usize;
            made.variables[target] = Variable { column: moved(column), linear, pairs: moved(pairs) };
        }
        made
    }
}
