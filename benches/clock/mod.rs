//! Best-of-several times, and the sweep that they are compared with.

use std::time::Instant;

use num_complex::Complex64;

/// Seconds of the fastest of several runs.
pub fn best(runs: usize, mut work: impl FnMut()) -> f64 {
    let once = |work: &mut dyn FnMut()| {
        let start = Instant::now();
        work();
        start.elapsed().as_secs_f64()
    };
    (0..runs).map(|_| once(&mut work)).fold(f64::INFINITY, f64::min)
}

/// Room for a state whose first amplitude can lie on a cache line, as the package allocates states; see [`aligned`]. Large
/// pages are up to the allocator: `GLIBC_TUNABLES=glibc.malloc.hugetlb=1` asks for them.
pub fn room(qubits: u32) -> Vec<Complex64> {
    vec![Complex64::new(0.0, 0.0); (1 << qubits) + 4]
}

/// The state inside its room: |0…0>.
pub fn aligned(room: &mut [Complex64]) -> &mut [Complex64] {
    let start = room.as_ptr().align_offset(64);
    let end = room.len() - 4 + start;
    let state = &mut room[start..end];
    state[0].re = 1.0;
    state
}

/// S1 in seconds: one thread multiplies every amplitude by a number, in place, in a plain loop. Prints it.
pub fn sweep(qubits: u32, state: &mut [Complex64]) -> f64 {
    let seconds = best(9, || {
        let by = std::hint::black_box(1.0);
        state.iter_mut().for_each(|amplitude| *amplitude *= by);
    });
    println!(
        "{qubits} qubits: S1 = {:.3} ms, {:.3} ns an amplitude",
        1e3 * seconds,
        1e9 * seconds / state.len() as f64
    );
    seconds
}

/// The sizes on the command line, or the usual ones.
pub fn sizes(usual: &[u32]) -> Vec<u32> {
    let asked: Vec<u32> = std::env::args().filter_map(|text| text.parse().ok()).collect();
    if asked.is_empty() { usual.to_vec() } else { asked }
}
