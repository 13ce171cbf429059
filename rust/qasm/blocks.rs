//! Principal powers of gates on one qubit under others on which every string is diagonal.
//!
//! For each value s of the diagonal qubits (bit b of s stands for (-1)^b of their Z) the gate is one of the target,
//!
//! ```text
//! U_s = e^{iα_s} exp(-i β_s n_s·σ),    U_s^k = e^{iα'_s} rz(2a_s) ry(2b_s) rz(2c_s)    by its eigenvalues e^{i(α_s ∓ β_s)}
//! ```
//!
//! and the power of the whole is Σ_s |s><s| U_s^k. A rotation of the target by an angle that depends on s is a product of
//! commuting ones: Σ_s θ_s |s><s| P = Σ_T θ̂_T Z_T P, where θ̂ is the Walsh-Hadamard transform of θ over 2^m and Z_T the product of
//! Z over T. So three such rotations and a diagonal phase are the power, exactly. Only eigenvalues enter: where an axis is
//! not determined, the angle is 0 or both eigenvalues are equal, and any axis serves.

use num_complex::Complex64;

use super::modifiers::Product;
use super::powers::{principal, require_digits, transform};
use super::refusal::{Place, Refusal};
use crate::pauli::PauliString;
use crate::rotations::Rotation;

/// Diagonal qubits whose values are all tried.
const MOST_DIAGONAL: usize = 10;

/// The power of a product; None where its strings are not diagonal on all qubits but one.
pub fn power(product: &Product, exponent: f64, place: Place) -> Result<Option<Product>, Refusal> {
    let (mixed, support) = product
        .list
        .iter()
        .fold((0, 0), |(mixed, all), rotation| (mixed | rotation.string.x, all | rotation.string.support()));
    let diagonal: Vec<u32> = (0..128).filter(|&qubit| (support & !mixed) >> qubit & 1 == 1).collect();
    if mixed.count_ones() != 1 || diagonal.len() > MOST_DIAGONAL {
        return Ok(None);
    }
    let size = 1usize << diagonal.len();
    let mut phases = Vec::with_capacity(size);
    let mut angles = [(); 3].map(|()| Vec::with_capacity(size));
    for value in 0..size {
        let ones = spread(value, &diagonal);
        let block: Vec<(usize, f64)> = product.list.iter().map(|rotation| on_target(rotation, mixed, ones)).collect();
        let (phase, turns) = one_qubit_power(&block, product.phase, exponent, place)?;
        phases.push(phase);
        angles.iter_mut().zip(turns).for_each(|(all, turn)| all.push(turn));
    }
    let mut made = Product::default();
    let z = PauliString { x: 0, z: mixed };
    let y = PauliString { x: mixed, z: mixed };
    for (string, angles) in [z, y, z].into_iter().zip(angles) {
        for (subset, angle) in spectrum(angles) {
            let string = PauliString { x: string.x, z: string.z ^ spread(subset, &diagonal) };
            made.list.push(Rotation { string, angle });
        }
    }
    // e^{iφ} is exp(-i θ P) with θ = -φ.
    for (subset, phase) in spectrum(phases) {
        match subset {
            0 => made.phase = phase,
            _ => made.list.push(Rotation { string: PauliString { x: 0, z: spread(subset, &diagonal) }, angle: -phase }),
        }
    }
    Ok(Some(made))
}

/// A mask of the diagonal qubits that a number picks.
fn spread(value: usize, diagonal: &[u32]) -> u128 {
    let picked = diagonal.iter().enumerate().filter(|&(bit, _)| value >> bit & 1 == 1);
    picked.fold(0, |all, (_, &qubit)| all | 1 << qubit)
}

/// What a rotation does to the target where the diagonal qubits have this value: its axis, 3 for the identity, and θ.
fn on_target(rotation: &Rotation, target: u128, ones: u128) -> (usize, f64) {
    let PauliString { x, z } = rotation.string;
    let axis = match (x & target != 0, z & target != 0) {
        (true, false) => 0,
        (true, true) => 1,
        (false, true) => 2,
        (false, false) => 3,
    };
    let odd = (z & !target & ones).count_ones() & 1 == 1;
    (axis, if odd { -rotation.angle } else { rotation.angle })
}

/// Coefficients of products of Z, those that are not zero: sums of at most 2^10 angles of size π vanish up to rounding.
fn spectrum(mut values: Vec<f64>) -> impl Iterator<Item = (usize, f64)> {
    transform(&mut values);
    let size = values.len() as f64;
    let found = values.into_iter().map(move |value| value / size).enumerate();
    found.filter(|(_, value)| value.abs() > 1e-15)
}

/// The phase and the angles a, b, c of exp(-i a Z) exp(-i b Y) exp(-i c Z), the first of them applied first.
fn one_qubit_power(
    block: &[(usize, f64)],
    phase: f64,
    exponent: f64,
    place: Place,
) -> Result<(f64, [f64; 3]), Refusal> {
    // exp(-i θ P) as a quaternion: cos θ and the three sines; the product multiplies out without a phase.
    let mut phase = phase;
    let mut real = 1.0;
    let mut axis = [0.0f64; 3];
    for &(which, angle) in block {
        if which == 3 {
            phase -= angle;
            continue;
        }
        let (sin, cos) = angle.sin_cos();
        // (cos - i sin σ_w)(r - i a·σ) = … with σ_w σ_v = i ε σ_u.
        let mut next = [cos * axis[0], cos * axis[1], cos * axis[2]];
        next[which] += sin * real;
        let (u, v) = ((which + 1) % 3, (which + 2) % 3);
        next[v] += sin * axis[u];
        next[u] -= sin * axis[v];
        real = cos * real - sin * axis[which];
        axis = next;
    }
    let length = axis.iter().map(|a| a * a).sum::<f64>().sqrt();
    let beta = length.atan2(real);
    let (low, high) = (principal(phase - beta), principal(phase + beta));
    let turned = 0.5 * exponent * (high - low);
    let phase = 0.5 * exponent * (high + low);
    require_digits(turned.abs().max(phase.abs()), exponent, place)?;
    // exp(-i turned n·σ)
    let (sin, cos) = turned.sin_cos();
    let n = if length > 0.0 { axis.map(|a| a / length) } else { [0.0, 0.0, 1.0] };
    let stay = Complex64::new(cos, -n[2] * sin);
    let flip = Complex64::new(n[1] * sin, -n[0] * sin);
    let middle = flip.norm().atan2(stay.norm());
    let (sum, difference) = (-stay.arg(), flip.arg());
    Ok((phase, [0.5 * (sum - difference), middle, 0.5 * (sum + difference)]))
}
