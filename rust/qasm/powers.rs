//! Powers of a gate that is written as a product of rotations.
//!
//! Whole powers repeat, and an angle times the exponent counts modulo 2π: multiples of π/16 exactly where the product is large,
//! and what would leave no digits is refused. Others are principal powers: with eigenvalues e^{iφ}, -π < φ ≤ π, those of the power are e^{ikφ}. Three
//! cases cover the library and what is built from it by controls:
//!
//! - The strings commute. Each sign of their independent generators is an eigenspace, its φ is a sum of the angles with
//!   signs, and the logarithm is again a sum of products of the generators, found by a Walsh-Hadamard transform.
//! - One qubit. U = e^{iα} exp(-i β n·σ) has the eigenvalues e^{i(α ∓ β)} and keeps its axis n.
//! - One qubit under others on which every string is diagonal: a block of the second kind for each of their values, so a
//!   controlled gate's power is the controlled power. See `blocks`.
//!
//! Anything else is refused; a numerical logarithm of a larger matrix is no sum of few strings.

use std::f64::consts::PI;

use super::modifiers::Product;
use super::refusal::{Place, Refusal};
use crate::pauli::PauliString;
use crate::rotations::Rotation;

/// Independent strings whose signs are all tried.
const MOST_GENERATORS: usize = 12;
/// Radians by which rounding may turn a power: an angle of 4.5 million.
const MOST_ROUNDING: f64 = 1e-9;

pub fn power(
    mut product: Product,
    qubits: u32,
    exponent: f64,
    whole: bool,
    limit: u64,
    place: Place,
) -> Result<Product, Refusal> {
    if whole && product.phase != 0.0 {
        let phase = multiplied(product.phase, exponent, place)?;
        product.phase = 0.0;
        let mut out = power(product, qubits, exponent, whole, limit, place)?;
        out.phase += phase;
        return Ok(out);
    }
    let plain = product.read(qubits, place)?;
    let read = if plain.frame().is_none() { Product::of(&plain, limit) } else { None };
    let candidates = [read, Some(product)];
    let mut candidates = candidates.into_iter().flatten();
    if whole {
        if let Some(found) = candidates.find(|product| commuting(&product.list)) {
            return scaled(found, exponent, place);
        }
        let repeat = exponent.abs() as u64;
        let refused = |error: crate::error::Error| place.refuse(format!("pow({exponent}): {error}"));
        let many = plain.times(repeat).map_err(refused)?;
        let out = Product::of(&many, limit).or_else(|| {
            // A relabelling is left over: the frame as it is, gate by gate, is what the caller can use.
            let short = repeat.saturating_mul(plain.count().max(1)) <= limit;
            short.then(|| unrolled(&plain, repeat)).flatten()
        });
        let out = out.ok_or_else(|| {
            place.refuse(format!("pow({exponent}): takes more than {limit} rotations; use a smaller exponent"))
        })?;
        return Ok(if exponent < 0.0 { out.inverse() } else { out });
    }
    for product in candidates {
        if product.list.is_empty() {
            let phase = exponent * principal(product.phase);
            require_digits(phase, exponent, place)?;
            return Ok(Product { list: vec![], phase });
        }
        if commuting(&product.list) {
            if let Some(found) = commuting_power(&product, exponent, place)? {
                return Ok(found);
            }
        } else if let Some(found) = super::blocks::power(&product, exponent, place)? {
            return Ok(found);
        }
    }
    Err(place.refuse(format!(
        "pow({exponent}): a power that is not whole, of a gate on {qubits} qubits whose rotations neither commute nor are \
         diagonal on all qubits but one, so that its root is no product of rotations known here; write the root as a gate \
         of its own"
    )))
}

/// The relabelling as rotations: each trade of two qubits is exp(-i π/4 (XX + YY + ZZ)) and a phase.
fn unrolled(circuit: &crate::rotations::Rotations, repeat: u64) -> Option<Product> {
    let frame = circuit.frame()?;
    let mut once = Product { list: circuit.written_out(1 << 21)?, phase: circuit.phase() };
    once.list.extend(frame.rotations());
    once.phase += f64::from(frame.eighths()) * PI / 4.0;
    let mut moves = frame.relabelling().to_vec();
    for qubit in 0..moves.len() {
        while moves[qubit] as usize != qubit {
            let target = moves[qubit] as usize;
            let both = 1u128 << qubit | 1 << target;
            for (x, z) in [(both, 0), (both, both), (0, both)] {
                once.list.push(Rotation { string: PauliString { x, z }, angle: PI / 4.0 });
            }
            once.phase += PI / 4.0;
            moves.swap(qubit, target);
        }
    }
    let mut all = Product::default();
    for _ in 0..repeat {
        all.list.extend_from_slice(&once.list);
        all.phase += once.phase;
    }
    Some(all)
}

fn commuting(list: &[Rotation]) -> bool {
    list.len() <= 1 << MOST_GENERATORS
        && list
            .iter()
            .enumerate()
            .all(|(place, one)| list[..place].iter().all(|other| one.string.commutes_with(other.string)))
}

fn scaled(mut product: Product, exponent: f64, place: Place) -> Result<Product, Refusal> {
    for rotation in &mut product.list {
        rotation.angle = multiplied(rotation.angle, exponent, place)?;
    }
    product.phase = multiplied(product.phase, exponent, place)?;
    Ok(product)
}

/// An angle times a whole number up to 2^53, right modulo 2π.
///
/// A multiple of π/16 (Cliffords, T, and T under a control), as close as rounding explains, stays one: beyond 2^12 of them,
/// where the digits of the product would begin to go, it is reduced by whole turns first.
fn multiplied(angle: f64, exponent: f64, place: Place) -> Result<f64, Refusal> {
    let sixteenths = (angle / (PI / 16.0)).round();
    let near = (angle - sixteenths * (PI / 16.0)).abs() <= 4.0 * f64::EPSILON * angle.abs();
    if near && sixteenths.abs() < 1e6 {
        let all = sixteenths as i128 * exponent as i128;
        let kept = if all.unsigned_abs() <= 1 << 12 { all } else { all.rem_euclid(32) };
        return Ok(kept as f64 * (PI / 16.0));
    }
    let product = angle * exponent;
    require_digits(product, exponent, place)?;
    Ok(product)
}

/// Refuses an angle whose rounding is seen modulo 2π.
pub fn require_digits(angle: f64, exponent: f64, place: Place) -> Result<(), Refusal> {
    if angle.abs() * f64::EPSILON <= MOST_ROUNDING {
        return Ok(());
    }
    Err(place.refuse(format!("pow({exponent}): the angle leaves no digits modulo 2π; reduce the exponent")))
}

/// The angle less a multiple of 2π, above -π and at most π; what is within rounding of -π counts as π.
pub fn principal(angle: f64) -> f64 {
    let turned = angle - 2.0 * PI * (angle / (2.0 * PI)).round();
    if turned <= -PI + 1e-12 { turned + 2.0 * PI } else { turned }
}

/// Products of the generators in order, with their signs: element m is the product of generators in the mask m.
fn elements(generators: &[PauliString]) -> Vec<(PauliString, bool)> {
    let mut all = vec![(PauliString::IDENTITY, false)];
    for generator in generators {
        for place in 0..all.len() {
            let (string, negative) = all[place];
            let (product, turns) = string.times(*generator);
            all.push((product, negative ^ (turns == 2)));
        }
    }
    all
}

fn commuting_power(product: &Product, exponent: f64, place: Place) -> Result<Option<Product>, Refusal> {
    let mut generators: Vec<PauliString> = Vec::new();
    let mut all = elements(&[]);
    let mut members = Vec::with_capacity(product.list.len());
    for rotation in &product.list {
        let member = all.iter().position(|(string, _)| *string == rotation.string).unwrap_or_else(|| {
            generators.push(rotation.string);
            all.len()
        });
        if generators.len() > MOST_GENERATORS {
            return Ok(None);
        }
        if member == all.len() {
            all = elements(&generators);
        }
        members.push(member);
    }
    // The eigenvalue of element m in sector λ is (-1)^{bits shared by m and λ}, its sign aside.
    let sign = |m: usize, sector: usize| if (m & sector).count_ones() & 1 == 1 { -1.0 } else { 1.0 };
    let mut spectrum: Vec<f64> = (0..all.len())
        .map(|sector| {
            let turned = members
                .iter()
                .zip(&product.list)
                .map(|(&m, rotation)| rotation.angle * sign(m, sector) * if all[m].1 { -1.0 } else { 1.0 });
            exponent * principal(product.phase - turned.sum::<f64>())
        })
        .collect();
    spectrum.iter().try_for_each(|&angle| require_digits(angle, exponent, place))?;
    transform(&mut spectrum);
    let size = spectrum.len() as f64;
    let mut made = Product { list: vec![], phase: spectrum[0] / size };
    for ((string, negative), value) in all.iter().zip(&spectrum).skip(1) {
        let angle = -value / size;
        // Sums of at most 2^12 angles of size π vanish up to rounding.
        if angle.abs() > 1e-15 {
            made.list.push(Rotation { string: *string, angle: if *negative { -angle } else { angle } });
        }
    }
    Ok(Some(made))
}

/// The Walsh-Hadamard transform without a factor, in place.
pub fn transform(values: &mut [f64]) {
    let mut half = 1;
    while half < values.len() {
        for start in (0..values.len()).step_by(2 * half) {
            for place in start..start + half {
                let (a, b) = (values[place], values[place + half]);
                (values[place], values[place + half]) = (a + b, a - b);
            }
        }
        half *= 2;
    }
}
