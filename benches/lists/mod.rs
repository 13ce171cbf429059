//! The lists of rotations that the benches run: one Strang step each of Hamiltonians from the literature, and random strings.

// Each bench uses a part.
#![allow(dead_code)]

use _native::pauli::PauliString;
use _native::rotations::Rotation;

/// A name and its rotations.
pub type Named = (&'static str, Vec<Rotation>);

const TURN: f64 = 0.05;

fn rotation(x: u128, z: u128, angle: f64) -> Rotation {
    Rotation { string: PauliString { x, z }, angle }
}

fn bond(qubits: u32, q: u32) -> u128 {
    1 << q | 1 << ((q + 1) % qubits)
}

/// Forth and back over parts, the doubled one in the middle once.
fn mirrored(parts: Vec<Vec<Rotation>>) -> Vec<Rotation> {
    let scaled = |part: &[Rotation], by: f64| -> Vec<Rotation> {
        part.iter().map(|r| Rotation { angle: by * r.angle, ..*r }).collect()
    };
    let middle = parts.len() - 1;
    let forth = parts[..middle].iter().flat_map(|part| scaled(part, 0.5));
    let back = parts[..middle].iter().rev().flat_map(|part| scaled(part, 0.5));
    forth.chain(scaled(&parts[middle], 1.0)).chain(back).collect()
}

fn exchange(bond: u128, strengths: [f64; 3]) -> Vec<Rotation> {
    let [x, y, z] = strengths.map(|s| s * TURN);
    vec![rotation(bond, 0, x), rotation(bond, bond, y), rotation(0, bond, z)]
}

fn fields(qubits: u32) -> Vec<Rotation> {
    (0..qubits).map(|q| rotation(0, 1 << q, 0.3 * TURN * (1.0 + f64::from(q) / f64::from(qubits)))).collect()
}

/// One step of a ring XX + YY + ZZ with fields along z, bond after bond and back.
pub fn heisenberg(qubits: u32, strengths: [f64; 3]) -> Vec<Rotation> {
    let bonds = (0..qubits).map(|q| exchange(bond(qubits, q), strengths));
    mirrored(bonds.chain([fields(qubits)]).collect())
}

/// One step of a ring ZZ with a transverse field.
pub fn ising(qubits: u32) -> Vec<Rotation> {
    let zz = (0..qubits).map(|q| rotation(0, bond(qubits, q), TURN)).collect();
    mirrored(vec![zz, (0..qubits).map(|q| rotation(1 << q, 0, 0.7 * TURN)).collect()])
}

/// One step of ZZ between all pairs, falling off as distance^-2, with a transverse field.
pub fn long_range_ising(qubits: u32) -> Vec<Rotation> {
    let pairs = (0..qubits).flat_map(|a| (0..a).map(move |b| (a, b)));
    let zz = pairs.map(|(a, b)| rotation(0, 1 << a | 1 << b, TURN / f64::from(a - b).powi(2))).collect();
    mirrored(vec![zz, (0..qubits).map(|q| rotation(1 << q, 0, 0.7 * TURN)).collect()])
}

/// One step of a Heisenberg ladder, rungs stronger than legs, with fields.
pub fn ladder(qubits: u32) -> Vec<Rotation> {
    let rungs = (0..qubits / 2).map(|r| exchange(0b11 << (2 * r), [1.3; 3]));
    let legs = (0..qubits - 2).map(|q| exchange(0b101 << q, [1.0; 3]));
    mirrored(rungs.chain(legs).chain([fields(qubits)]).collect())
}

/// One step of the Hubbard model on 2 rows under Jordan-Wigner, qubit = 2 site + spin, sites along the rows.
pub fn fermions(qubits: u32) -> Vec<Rotation> {
    let columns = qubits / 4;
    let site = |row: u32, column: u32| row * columns + column;
    let along = (0..2).flat_map(|row| (1..columns).map(move |c| (site(row, c - 1), site(row, c))));
    let across = (0..columns).map(|c| (site(0, c), site(1, c)));
    let hopping = along.chain(across).flat_map(|pair| [0, 1].map(move |spin| (pair, spin))).map(|((a, b), spin)| {
        let (low, high) = (2 * a + spin, 2 * b + spin);
        let between = ((1u128 << high) - 1) & !((1u128 << (low + 1)) - 1);
        let ends = 1u128 << low | 1 << high;
        vec![rotation(ends, between, -0.5 * TURN), rotation(ends, between | ends, -0.5 * TURN)]
    });
    let repulsion = (0..qubits / 2).flat_map(|s| {
        let both = 0b11u128 << (2 * s);
        [rotation(0, both, TURN), rotation(0, both & both >> 1, -TURN), rotation(0, both & both << 1, -TURN)]
    });
    let repulsion: Vec<Rotation> = repulsion.collect();
    mirrored(hopping.chain([repulsion]).collect())
}

/// A generator of reproducible numbers: the constants of Knuth's linear congruential MMIX generator.
fn numbers(seed: u64) -> impl FnMut() -> u64 {
    let mut state = seed;
    move || {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        state >> 20
    }
}

/// 25 x masks of four qubits with eight commuting strings each, as double excitations of a molecule have; `true_signs` gives
/// the signs of an excitation, which leave most amplitudes alone, else all signs are equal.
pub fn excitations(qubits: u32, true_signs: bool) -> Vec<Rotation> {
    let mut next = numbers(5);
    let mut list = vec![];
    for _ in 0..25 {
        let mut ends: Vec<u32> = vec![];
        while ends.len() < 4 {
            let q = (next() % u64::from(qubits)) as u32;
            if !ends.contains(&q) {
                ends.push(q);
            }
        }
        ends.sort_unstable();
        let x = ends.iter().fold(0u128, |mask, q| mask | 1 << q);
        let between = |a: u32, b: u32| (a + 1..b).fold(0u128, |mask, q| mask | 1 << q);
        let chain = between(ends[0], ends[1]) | between(ends[2], ends[3]);
        let angle = 0.05 * ((next() % 1000) as f64 / 1000.0 - 0.5);
        for pattern in (0..16u32).filter(|p| p.count_ones() & 1 == 1) {
            let z = (0..4).fold(chain, |z, j| if pattern >> j & 1 == 1 { z | 1 << ends[j] } else { z });
            let signed = true_signs && ((pattern & 1) + (pattern >> 1 & 1)) * 2 + (pattern.count_ones() & 2) == 0;
            list.push(rotation(x, z, if signed { -angle } else { angle }));
        }
    }
    list
}

/// Strings with every letter equally likely on every qubit.
pub fn random(qubits: u32, count: usize) -> Vec<Rotation> {
    let mut next = numbers(9);
    let all = (1u128 << qubits) - 1;
    let mut mask = || (u128::from(next()) << 32 ^ u128::from(next())) & all;
    (0..count).map(|_| rotation(mask(), mask(), 0.1)).collect()
}

/// Strings of one weight, on any qubits, with any letters.
pub fn of_weight(qubits: u32, weight: u32, count: usize) -> Vec<Rotation> {
    let mut next = numbers(17);
    let mut string = || {
        let (mut x, mut z) = (0u128, 0u128);
        while (x | z).count_ones() < weight {
            let place = 1u128 << (next() % u64::from(qubits));
            if (x | z) & place == 0 {
                let letter = 1 + next() % 3;
                x |= place * u128::from(letter & 1);
                z |= place * u128::from(letter >> 1);
            }
        }
        rotation(x, z, 0.1)
    };
    (0..count).map(|_| string()).collect()
}

/// The steps of the table in the README of this folder.
pub fn steps(qubits: u32) -> Vec<Named> {
    let mut all = vec![
        ("Heisenberg ring, equal", heisenberg(qubits, [1.0; 3])),
        ("Heisenberg ring, unequal", heisenberg(qubits, [1.0, 0.9, 1.1])),
        ("Ising ring", ising(qubits)),
        ("Ising, all pairs", long_range_ising(qubits)),
        ("Heisenberg ladder", ladder(qubits)),
        ("25 x masks of 8 strings", excitations(qubits, false)),
        ("25 double excitations", excitations(qubits, true)),
        ("200 random strings", random(qubits, 200)),
    ];
    if qubits.is_multiple_of(4) {
        all.push(("fermions on 2 rows", fermions(qubits)));
    }
    all
}
