//! ctrl, negctrl, inv and pow on any gate, exactly.
//!
//! A gate under a modifier is written as a product of rotations exp(-i θ P) and a phase, and so is the result:
//!
//! ```text
//! inv      the rotations in reverse, with -θ
//! ctrl     exp(-i θ P) becomes exp(-i θ (1 - Z_c)/2 P) = exp(-i θ/2 P) exp(+i θ/2 Z_c P); a phase φ becomes φ/2 and
//!          exp(-i φ/2 Z_c). The two commute, and a product of controlled factors is the controlled product
//! negctrl  the same with (1 + Z_c)/2
//! pow      see `powers`
//! ```
//!
//! Each control doubles the number of rotations. A gate with a body is first read by conjugation, so that a controlled ladder
//! stays one string with its control, and written out gate by gate only where a Clifford is left over.

use super::conjugation::{Builder, Keep};
use super::powers;
use super::refusal::{Place, Refusal};
use crate::clifford::move_string;
use crate::pauli::PauliString;
use crate::rotations::{Rotation, Rotations};

/// Rotations on the qubits of one call, numbered from 0, and a phase.
#[derive(Clone, Debug, Default)]
pub struct Product {
    pub list: Vec<Rotation>,
    pub phase: f64,
}

impl Product {
    /// A circuit written out, its frame included; None beyond the limit.
    pub fn of(circuit: &Rotations, limit: u64) -> Option<Self> {
        let mut list = circuit.written_out(limit)?;
        let mut phase = circuit.phase();
        if let Some(frame) = circuit.frame() {
            if !frame.keeps_places() {
                return None;
            }
            list.extend(frame.rotations());
            phase += f64::from(frame.eighths()) * std::f64::consts::FRAC_PI_4;
        }
        Some(Self { list, phase })
    }

    /// Appends the product to what was read; `qubits` names its qubits in the file.
    pub fn emit(&self, into: &mut Builder, qubits: &[u32], fixed: bool) {
        for rotation in &self.list {
            into.rotate(move_string(rotation.string, qubits), rotation.angle, fixed);
        }
        into.gate_phase(self.phase);
    }

    /// The product read by conjugation.
    pub fn read(&self, qubits: u32, place: Place) -> Result<Rotations, Refusal> {
        let mut builder = Builder::new(qubits, Keep::Nothing);
        let names: Vec<u32> = (0..qubits).collect();
        self.emit(&mut builder, &names, true);
        builder.finish().map_err(|error| place.refuse(error.to_string()))
    }

    pub fn inverse(mut self) -> Self {
        self.list.reverse();
        self.list.iter_mut().for_each(|rotation| rotation.angle = -rotation.angle);
        self.phase = -self.phase;
        self
    }

    /// Puts a control in front: its qubit is 0, and the others move up by one.
    pub fn controlled(self, on_one: bool) -> Self {
        let sign = if on_one { -0.5 } else { 0.5 };
        let mut list = Vec::with_capacity(2 * self.list.len() + 1);
        for Rotation { string, angle } in self.list {
            let string = PauliString { x: string.x << 1, z: string.z << 1 };
            list.push(Rotation { string, angle: 0.5 * angle });
            list.push(Rotation { string: PauliString { x: string.x, z: string.z | 1 }, angle: sign * angle });
        }
        // e^{iφ (1 ∓ Z)/2}
        list.push(Rotation { string: PauliString { x: 0, z: 1 }, angle: -sign * self.phase });
        list.retain(|rotation| rotation.angle != 0.0);
        Self { list, phase: 0.5 * self.phase }
    }
}

/// A modifier with its numbers known.
#[derive(Clone, Copy, Debug)]
pub enum Applied {
    Inverse,
    /// An exponent, and whether it is a whole number.
    Power(f64, bool),
    /// How many controls, and whether they act on 1.
    Controls(u32, bool),
}

/// Qubits that a list of modifiers adds to its gate.
pub fn controls(modifiers: &[Applied]) -> u64 {
    let count = |modifier: &Applied| if let Applied::Controls(count, _) = modifier { u64::from(*count) } else { 0 };
    modifiers.iter().map(count).sum()
}

/// Carries modifiers out, the last one first.
pub fn modified(
    mut product: Product,
    mut qubits: u32,
    modifiers: &[Applied],
    limit: u64,
    place: Place,
) -> Result<Product, Refusal> {
    for modifier in modifiers.iter().rev() {
        product = match *modifier {
            Applied::Inverse => product.inverse(),
            Applied::Power(exponent, whole) => powers::power(product, qubits, exponent, whole, limit, place)?,
            Applied::Controls(count, on_one) => {
                for _ in 0..count {
                    if 2 * product.list.len() as u64 > limit {
                        return Err(place.refuse(format!(
                            "too many controls ({count}): each doubles the rotations, and more than {limit} are refused; \
                             use fewer controls or helper qubits"
                        )));
                    }
                    product = product.controlled(on_one);
                }
                qubits += count;
                product
            }
        };
    }
    Ok(product)
}
