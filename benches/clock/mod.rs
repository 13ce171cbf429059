//! Best-of-several times, and the sweep that they are compared with.

// Each bench uses a part.
#![allow(dead_code)]

use std::time::Instant;

use _native::kernel::Isa;
use _native::kernel::lanes::Real;
use _native::kernel::pages::ask_for_large_pages;
use _native::kernel::peak::arithmetic;
use num_complex::Complex;

/// Seconds of the fastest of several runs.
pub fn best(runs: usize, mut work: impl FnMut()) -> f64 {
    let once = |work: &mut dyn FnMut()| {
        let start = Instant::now();
        work();
        start.elapsed().as_secs_f64()
    };
    (0..runs).map(|_| once(&mut work)).fold(f64::INFINITY, f64::min)
}

/// Room for a state that can begin on a large page, as the package allocates states; see [`aligned`].
pub fn room<T: Real>(qubits: u32) -> Vec<Complex<T>> {
    let spare = LARGE_PAGE / size_of::<Complex<T>>();
    let count = (1 << qubits) + spare;
    let mut room = Vec::with_capacity(count);
    ask_for_large_pages(room.spare_capacity_mut());
    room.resize(count, Complex::new(T::default(), T::default()));
    room
}

/// Bytes of a large page.
const LARGE_PAGE: usize = 1 << 21;

/// The state inside its room, with amplitudes of one size: few rotations leave many of |0…0> so small that single precision
/// holds them as subnormal numbers, on which processors are slow.
pub fn aligned<T: Real>(room: &mut [Complex<T>]) -> &mut [Complex<T>] {
    let start = room.as_ptr().align_offset(LARGE_PAGE);
    let end = room.len() - LARGE_PAGE / size_of::<Complex<T>>() + start;
    let state = &mut room[start..end];
    let size = (state.len() as f64).powf(-0.5);
    for (index, amplitude) in state.iter_mut().enumerate() {
        amplitude.re =
            T::from_f64(if (index.wrapping_mul(0x9e37_79b9) >> 16).count_ones() & 1 == 1 { -size } else { size });
    }
    state
}

/// S1 in seconds: one thread multiplies every amplitude by a number, in place, in a plain loop. Prints it.
pub fn sweep<T: Real>(state: &mut [Complex<T>]) -> f64 {
    let qubits = state.len().ilog2();
    let seconds = best(9, || {
        let by = std::hint::black_box(T::from_f64(1.0));
        for amplitude in state.iter_mut() {
            (amplitude.re, amplitude.im) = (amplitude.re * by, amplitude.im * by);
        }
    });
    println!(
        "{qubits} qubits: S1 = {:.3} ms, {:.3} ns an amplitude",
        1e3 * seconds,
        1e9 * seconds / state.len() as f64
    );
    seconds
}

/// Products and sums of reals that one thread does in a second, in registers. Prints it with the instruction set.
pub fn peak<T: Real>() -> f64 {
    let isa = Isa::chosen().expect("a known instruction set");
    let mut done = 0;
    let seconds = best(5, || done = arithmetic::<T>(isa, 2_000_000));
    println!("{}: {:.1} G real operations a second on one thread", isa.name(), 1e-9 * done as f64 / seconds);
    done as f64 / seconds
}

/// The sizes on the command line, or the usual ones.
pub fn sizes(usual: &[u32]) -> Vec<u32> {
    let asked: Vec<u32> = std::env::args().filter_map(|text| text.parse().ok()).collect();
    if asked.is_empty() { usual.to_vec() } else { asked }
}
