//! How far is one application of H (and one Chebyshev term) from the in-place sweep of the same state?
//!
//! `cargo bench --no-default-features --bench action -- [QUBITS ...]` prints, for one and two threads, the best of five
//! times as a multiple of S1, the one-thread loop that multiplies every amplitude by a number.

mod clock;

use _native::action::Action;
use _native::apply::{chebyshev_sums, expectations};
use _native::pauli::PauliString;
use _native::team::Control;
use _native::terms::Terms;
use clock::{aligned, best, room, sizes, sweep};

fn main() {
    sizes(&[14, 18, 20]).into_iter().for_each(report);
}

fn report(qubits: u32) {
    let mut rooms = [room(qubits), room(qubits), room(qubits)];
    let [state, previous, sum] = rooms.each_mut().map(|room| aligned(room));
    let control = Control::default();
    let sweep = sweep(qubits, state);
    let bonds = (0..qubits).map(|q| 1u128 << q | 1u128 << ((q + 1) % qubits));
    let strings = bonds.flat_map(|bond| [(bond, 0), (bond, bond), (0, bond)].map(|(x, z)| (PauliString { x, z }, 1.0)));
    let ring = Terms::new(Some(qubits), strings).expect("strings within the qubits");
    let action = Action::new(&ring, 1.0, 0.0);
    let coefficients = vec![vec![0.1; 9]];
    for threads in [1, 2] {
        let value = best(5, || {
            expectations(&[&ring], state, threads, &control).expect("no stop asked");
        });
        let terms = best(5, || {
            let mut sums = [&mut *sum];
            let done = chebyshev_sums(&action, state, previous, &mut sums, &coefficients, threads, &control);
            done.expect("no stop asked");
        });
        println!(
            "{threads} threads, Heisenberg ring: expectation {:.2} S1, Chebyshev term {:.2} S1",
            value / sweep,
            terms / 8.0 / sweep
        );
    }
}
