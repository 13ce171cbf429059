//! How much faster is complex64 than complex128, on steps of many rotations?
//!
//! `cargo bench --no-default-features --bench precision -- [QUBITS ...]` prints the times on one and two threads and their quotients.

mod clock;
mod lists;

use _native::evolve::evolve;
use _native::kernel::lanes::Real;
use _native::rotations::Rotations;
use _native::team::Control;
use clock::{aligned, best, room, sizes};

fn main() {
    for qubits in sizes(&[20, 24]) {
        println!("{qubits} qubits{:>38}{:>12}", "1 thread", "2 threads");
        for (name, list) in lists::steps(qubits) {
            let step = Rotations::from_list(qubits, list, 0.0).expect("strings within the qubits");
            let (double, single) = (times::<f64>(&step), times::<f32>(&step));
            println!("{name:<28}{:>16.2} x{:>10.2} x", double[0] / single[0], double[1] / single[1]);
        }
    }
}

fn times<T: Real>(step: &Rotations) -> [f64; 2] {
    let mut room = room::<T>(step.qubits());
    let state = aligned(&mut room);
    [1, 2].map(|threads| {
        best(5, || {
            evolve(state, step, threads, &Control::default()).expect("no stop asked");
        })
    })
}
