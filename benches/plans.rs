//! Is a planned list ever slower than its rotations one at a time?
//!
//! `cargo bench --no-default-features --bench plans -- [QUBITS ...]` runs, on one thread, lists of 2 to 64 random strings of
//! one weight each, and of strings that alternate between two that do not commute, through the planner and one by one. It
//! prints the quotient planned / one by one: the median and the largest of all lists, and which list that was.

mod clock;
mod lists;

use _native::evolve::evolve;
use _native::pauli::PauliString;
use _native::rotations::{Rotation, Rotations};
use _native::team::Control;
use clock::{aligned, best, room, sizes};
use num_complex::Complex64;

/// Amplitudes times rotations that one timing goes over, at least: fast lists are repeated.
const LEAST_WORK: usize = 1 << 22;

fn main() {
    for qubits in sizes(&[14, 16, 18, 20, 22, 24]) {
        let mut room = room(qubits);
        let state = aligned(&mut room);
        let mut quotients: Vec<(f64, String)> = vec![];
        for length in [2, 3, 5, 8, 16, 32, 64] {
            for weight in [1, 2, 3, qubits / 2, qubits] {
                let list = lists::of_weight(qubits, weight, length);
                quotients.push((quotient(state, &list), format!("{length} strings of weight {weight}")));
            }
            for (name, low) in [("bottom", 0), ("top", qubits - 1)] {
                let list = alternating(low, length);
                quotients.push((quotient(state, &list), format!("{length} times X or Z on the {name} qubit")));
            }
        }
        quotients.sort_by(|a, b| a.0.total_cmp(&b.0));
        let (median, (worst, which)) = (quotients[quotients.len() / 2].0, &quotients[quotients.len() - 1]);
        println!("{qubits} qubits, {} lists: median {median:.2}, largest {worst:.2} ({which})", quotients.len());
    }
}

fn alternating(qubit: u32, length: usize) -> Vec<Rotation> {
    let one = |place: usize| {
        let (x, z) = if place & 1 == 0 { (1 << qubit, 0) } else { (0, 1 << qubit) };
        Rotation { string: PauliString { x, z }, angle: 0.1 }
    };
    (0..length).map(one).collect()
}

fn quotient(state: &mut [Complex64], list: &[Rotation]) -> f64 {
    let qubits = state.len().ilog2();
    let circuit = |list: Vec<Rotation>| Rotations::from_list(qubits, list, 0.0).expect("strings within the qubits");
    let singles: Vec<Rotations> = list.iter().map(|rotation| circuit(vec![*rotation])).collect();
    let whole = vec![circuit(list.to_vec())];
    let rounds = (LEAST_WORK / (state.len() * list.len())).max(1);
    let mut time = |circuits: &[Rotations]| {
        best(9, || {
            for circuit in (0..rounds).flat_map(|_| circuits) {
                evolve(state, circuit, 1, &Control::default()).expect("no stop asked");
            }
        })
    };
    time(&whole) / time(&singles)
}
