//! How far is one rotation from the in-place sweep of the same state, by kind of string?
//!
//! `cargo bench --no-default-features --bench rotations -- [QUBITS ...]` prints, for one and two threads, the best time of each
//! string as a multiple of S1, then the median and the worst of the structured strings and of 16 random ones.

mod clock;
mod lists;

use _native::evolve::evolve;
use _native::pauli::PauliString;
use _native::rotations::{Rotation, Rotations};
use _native::team::Control;
use clock::{aligned, best, room, sizes, sweep};
use num_complex::Complex64;

fn main() {
    sizes(&[14, 20, 24]).into_iter().for_each(report);
}

fn report(qubits: u32) {
    let mut room = room(qubits);
    let state = aligned(&mut room);
    let sweep = sweep(state);
    let mut summary = |title: &str, strings: Vec<(String, Rotation)>, shown: bool| {
        let times: Vec<[f64; 2]> = strings.iter().map(|(_, r)| both(state, r).map(|t| t / sweep)).collect();
        for ((name, _), [one, two]) in strings.iter().zip(&times).filter(|_| shown) {
            println!("  {name:<24}{one:>8.2} S1{two:>8.2} S1");
        }
        for (threads, column) in [(1, 0), (2, 1)] {
            let mut sorted: Vec<f64> = times.iter().map(|pair| pair[column]).collect();
            sorted.sort_by(f64::total_cmp);
            let (median, worst) = (sorted[sorted.len() / 2], sorted[sorted.len() - 1]);
            println!("{title}, {threads} threads: median {median:.2} S1, worst {worst:.2} S1");
        }
    };
    summary("structured strings", structured(qubits), true);
    let random = lists::random(qubits, 16).into_iter().map(|rotation| (String::new(), rotation)).collect();
    summary("random strings", random, false);
}

fn both(state: &mut [Complex64], rotation: &Rotation) -> [f64; 2] {
    let circuit = Rotations::from_list(state.len().ilog2(), vec![*rotation], 0.0).expect("strings within the qubits");
    [1, 2].map(|threads| {
        best(7, || {
            evolve(state, &circuit, threads, &Control::default()).expect("no stop asked");
        })
    })
}

fn structured(qubits: u32) -> Vec<(String, Rotation)> {
    let all = (1u128 << qubits) - 1;
    let (top, middle) = (1u128 << (qubits - 1), 1u128 << (qubits / 2));
    let named = [
        ("Z on qubit 0", 0, 1),
        ("Z on the top qubit", 0, top),
        ("Z on all", 0, all),
        ("X on qubit 0", 1, 0),
        ("Y on qubit 1", 2, 2),
        ("X on qubit 2", 4, 0),
        ("X on qubit 3", 8, 0),
        ("Y in the middle", middle, middle),
        ("X on the top qubit", top, 0),
        ("XX on qubits 0 and 1", 3, 0),
        ("XX on 0 and the top", 1 | top, 0),
        ("YY in the middle", middle | middle << 1, middle | middle << 1),
        ("X Z…Z X from end to end", 1 | top, all & !1 & !top),
        ("X on all", all, 0),
        ("Y on all", all, all),
        ("X on 3, Z on all others", 8, all & !8),
    ];
    let made =
        |(name, x, z): (&str, u128, u128)| (name.to_string(), Rotation { string: PauliString { x, z }, angle: 0.1 });
    named.into_iter().map(made).collect()
}
