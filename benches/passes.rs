//! How far is one rotation, and a step of many, from the in-place sweep of the same state?
//!
//! `cargo bench --no-default-features --bench passes -- [QUBITS ...]` prints, for one and two threads, the best of nine
//! times of each circuit as a multiple of S1, the one-thread engine pass that multiplies every amplitude by a constant.

mod clock;

use _native::evolve::evolve;
use _native::pauli::PauliString;
use _native::rotations::{Rotation, Rotations};
use _native::team::Control;
use clock::{best, sizes, sweep};
use num_complex::Complex64;

fn main() {
    sizes(&[14, 18, 20, 24]).into_iter().for_each(report);
}

fn report(qubits: u32) {
    let mut state = vec![Complex64::new(0.0, 0.0); 1 << qubits];
    state[0].re = 1.0;
    let sweep = sweep(qubits, &mut state);
    println!("{:<28}{:>10}{:>8}{:>12}{:>12}", "circuit", "rotations", "passes", "1 thread", "2 threads");
    for (name, list) in circuits(qubits) {
        let circuit = Rotations::from_list(qubits, list, 0.0).expect("strings within the qubits");
        let mut passes = 0;
        let times = [1, 2].map(|threads| {
            best(9, || {
                passes = evolve(&mut state, &circuit, threads, &Control::default()).expect("no stop asked").passes
            })
        });
        println!(
            "{name:<28}{:>10}{passes:>8}{:>9.2} S1{:>9.2} S1",
            circuit.count(),
            times[0] / sweep,
            times[1] / sweep
        );
    }
}

fn circuits(qubits: u32) -> Vec<(&'static str, Vec<Rotation>)> {
    let all = (1u128 << qubits) - 1;
    let top = 1u128 << (qubits - 1);
    let one = |x: u128, z: u128| vec![Rotation { string: PauliString { x, z }, angle: 0.1 }];
    let ring: Vec<u128> = (0..qubits).map(|q| if q + 1 == qubits { top | 1 } else { 3 << q }).collect();
    let list = |strings: Vec<(u128, u128)>| strings.into_iter().flat_map(|(x, z)| one(x, z)).collect::<Vec<_>>();
    let heisenberg: Vec<(u128, u128)> =
        [(1, 0), (1, 1), (0, 1)].iter().flat_map(|(x, z)| ring.iter().map(move |bond| (x * bond, z * bond))).collect();
    let bonds: Vec<(u128, u128)> = ring
        .iter()
        .step_by(2)
        .chain(ring.iter().skip(1).step_by(2))
        .flat_map(|&bond| [(bond, 0), (bond, bond), (0, bond)])
        .collect();
    let mut strang = heisenberg.clone();
    strang.extend(heisenberg[..2 * ring.len()].iter().rev());
    vec![
        ("X on qubit 0", one(1, 0)),
        ("X on qubit 2", one(4, 0)),
        ("X on the top qubit", one(top, 0)),
        ("Y on the top qubit", one(top, top)),
        ("X on all", one(all, 0)),
        ("X and Z mixed", one(0x5555_5555 & all, 0x3333_3333 & all)),
        ("Z on the top qubit", one(0, top)),
        ("ring of XX", list(ring.iter().map(|&bond| (bond, 0)).collect())),
        ("ring of ZZ", list(ring.iter().map(|&bond| (0, bond)).collect())),
        ("Heisenberg ring, Lie step", list(heisenberg)),
        ("Heisenberg ring, Strang step", list(strang)),
        ("the Lie step bond by bond", list(bonds)),
    ]
}
