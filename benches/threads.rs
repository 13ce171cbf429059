//! Are two threads ever slower than one, from 4 to 28 qubits?
//!
//! `cargo bench --no-default-features --bench threads -- [QUBITS ...]` prints the time of a step of a Heisenberg ring on one
//! thread and on two, and the quotient. Small states run on one thread whatever is asked.

mod clock;
mod lists;

use _native::evolve::evolve;
use _native::rotations::Rotations;
use _native::team::Control;
use clock::{aligned, best, room, sizes};

fn main() {
    println!("{:>6}{:>14}{:>14}{:>10}", "qubits", "1 thread, s", "2 threads, s", "speed-up");
    for qubits in sizes(&(4..=26).collect::<Vec<_>>()) {
        let mut room = room::<f64>(qubits);
        let state = aligned(&mut room);
        let step = Rotations::from_list(qubits, lists::heisenberg(qubits, [1.0; 3]), 0.0).expect("strings within");
        let runs = (1usize << 24).checked_shr(qubits).unwrap_or(0).clamp(3, 400);
        // Turn about, so that a busy moment of the machine hits both alike.
        let mut times = [f64::INFINITY; 2];
        for _ in 0..runs {
            for (time, threads) in times.iter_mut().zip([1, 2]) {
                *time = time.min(best(1, || {
                    evolve(state, &step, threads, &Control::default()).expect("no stop asked");
                }));
            }
        }
        println!("{qubits:>6}{:>14.3e}{:>14.3e}{:>10.2}", times[0], times[1], times[0] / times[1]);
    }
}
