//! How many in-place sweeps does an application of H cost, an expectation, a term of the Chebyshev expansion?
//!
//! `cargo bench --no-default-features --bench action -- [QUBITS ...]` prints, for one and two threads, the best time as a
//! multiple of S1, the one-thread loop that multiplies every amplitude by a number; *moved* is the time of a Chebyshev term
//! whose passes add nothing but the diagonal: all its loads and stores.

mod clock;
mod lists;

use _native::action::Action;
use _native::apply::{apply, chebyshev_sums, expectations};
use _native::team::Control;
use _native::terms::Terms;
use clock::{aligned, best, room, sizes, sweep};

fn main() {
    sizes(&[18, 20, 24]).into_iter().for_each(report);
}

fn report(qubits: u32) {
    let mut rooms = [room(qubits), room(qubits), room(qubits)];
    let [state, previous, sum] = rooms.each_mut().map(|room| aligned(room));
    let control = Control::default();
    let sweep = sweep(state);
    println!(
        "{:<28}{:>8}{:>8}{:>8}{:>13}{:>17}{:>8}",
        "operator", "passes", "threads", "H psi", "expectation", "Chebyshev term", "moved"
    );
    for (name, list) in [
        ("Heisenberg ring, equal", lists::heisenberg(qubits, [1.0; 3])),
        ("Heisenberg ring, unequal", lists::heisenberg(qubits, [1.0, 0.9, 1.1])),
        ("Ising ring", lists::ising(qubits)),
        ("Ising, all pairs", lists::long_range_ising(qubits)),
        ("25 double excitations", lists::excitations(qubits, true)),
        ("100 random strings", lists::random(qubits, 100)),
    ] {
        // The angles of a step serve as coefficients; what is listed twice adds up.
        let strings = list.into_iter().map(|rotation| (rotation.string, rotation.angle));
        let terms = Terms::new(Some(qubits), strings).expect("strings within the qubits");
        let action = Action::new(&terms, 1.0, 0.0);
        let mut idle = Action::new(&terms, 1.0, 0.0);
        idle.passes.iter_mut().for_each(|pass| pass.addends.clear());
        let coefficients = vec![vec![0.1; 9]];
        for threads in [1, 2] {
            let image = best(3, || {
                apply(&action, state, previous, threads, &control).expect("no stop asked");
            });
            let value = best(3, || {
                expectations(&[&terms], state, threads, &control).expect("no stop asked");
            });
            let [series, moved] = [&action, &idle].map(|action| {
                best(3, || {
                    let mut sums = [&mut *sum];
                    let done = chebyshev_sums(action, state, previous, &mut sums, &coefficients, threads, &control);
                    done.expect("no stop asked");
                })
            });
            let [image, value, series, moved] = [image, value, series / 8.0, moved / 8.0].map(|time| time / sweep);
            let passes = action.passes.len();
            println!("{name:<28}{passes:>8}{threads:>8}{image:>8.2}{value:>13.2}{series:>17.2}{moved:>8.2}");
        }
    }
}
