//! How many in-place sweeps does a step of many rotations cost, against one rotation at a time?
//!
//! `cargo bench --no-default-features --bench steps -- [QUBITS ...]` prints, for one and two threads, the best time of each
//! list as a multiple of S1, the one-thread loop that multiplies every amplitude by a constant, the time of the same list
//! one rotation at a time, the time of a step among eight in a row, the time of its passes without their operations (all loads
//! and stores, no arithmetic) and the arithmetic limit: the time that its products and sums alone take one thread, at the
//! rate at which registers multiply and add in the same run.

mod clock;
mod lists;

use std::env;

use _native::evolve::{Planned, evolve};
use _native::kernel::Isa;
use _native::kernel::carry::Carrier;
use _native::kernel::shared::Shared;
use _native::passes::Pass;
use _native::rotations::{Rotation, Rotations};
use _native::team::{Control, run};
use clock::{aligned, best, peak, room, sizes, sweep};
use num_complex::Complex64;

fn main() {
    sizes(&[20, 24]).into_iter().for_each(report);
}

fn report(qubits: u32) {
    let mut room = room(qubits);
    let state = aligned(&mut room);
    let sweep = sweep(state);
    let peak = peak::<f64>();
    let only = env::var("TRUETURN_BENCH_ONLY").unwrap_or_default();
    println!(
        "{:<28}{:>10}{:>8}{:>9}{:>9}{:>11}{:>8}{:>11}{:>9}{:>12}",
        "list", "rotations", "passes", "1 thread", "2", "in a row 1", "2", "unfused 1", "moved 1", "arithmetic"
    );
    for (name, list) in lists::steps(qubits).into_iter().filter(|(name, _)| name.contains(&only)) {
        let once = Rotations::from_list(qubits, list.clone(), 0.0).expect("strings within the qubits");
        let row = once.times(8).expect("no phase");
        let mut passes = 0;
        let steps = [1, 2].map(|threads| {
            best(5, || passes = evolve(state, &once, threads, &Control::default()).expect("no stop asked").passes)
        });
        let rows = [1, 2].map(|threads| {
            let eight = best(2, || {
                evolve(state, &row, threads, &Control::default()).expect("no stop asked");
            });
            eight / 8.0
        });
        let single = unfused(state, &list);
        print!("{name:<28}{:>10}{passes:>8}", list.len());
        let mut planned = vec![];
        let plan = Planned::<f64>::circuit(&once, &Control::default()).expect("no stop asked");
        plan.each_list(1, &mut |passes, _| planned.extend_from_slice(passes));
        let operations: f64 = planned.iter().map(|pass| pass.work.arithmetic()).sum();
        let arithmetic = operations * state.len() as f64 / peak;
        let moved = moved(state, planned);
        print!("{:>9.2}{:>9.2}{:>11.2}{:>8.2}", steps[0] / sweep, steps[1] / sweep, rows[0] / sweep, rows[1] / sweep);
        println!("{:>11.1}{:>9.2}{:>12.2}", single / sweep, moved / sweep, arithmetic / sweep);
    }
}

/// Time of the list one rotation at a time, on one thread.
fn unfused(state: &mut [Complex64], list: &[Rotation]) -> f64 {
    let qubits = state.len().ilog2();
    let circuits: Vec<Rotations> =
        list.iter().map(|r| Rotations::from_list(qubits, vec![*r], 0.0).expect("strings within the qubits")).collect();
    best(1, || {
        for circuit in &circuits {
            evolve(state, circuit, 1, &Control::default()).expect("no stop asked");
        }
    })
}

/// Time of passes without their operations, on one thread.
fn moved(state: &mut [Complex64], mut passes: Vec<Pass<f64>>) -> f64 {
    for pass in &mut passes {
        pass.single = None;
        pass.work.stages.iter_mut().flat_map(|stage| &mut stage.runs).for_each(|run| run.operations.clear());
    }
    let (isa, state) = (Isa::chosen().expect("a known instruction set"), Shared::new(state));
    best(3, || {
        let done = run(1, &Control::default(), |member| {
            let mut carrier = Carrier::new(isa, member, &state);
            (1..).zip(&passes).try_for_each(|(number, pass)| carrier.pass(pass, number == passes.len()))
        });
        done.expect("no stop asked");
    })
}
