//! Applies a circuit to a state vector in place.

use std::f64::consts::FRAC_PI_4;

use num_complex::Complex;

use crate::error::{Error, Result};
use crate::frame::Frame;
use crate::kernel::Isa;
use crate::kernel::carry::Carrier;
use crate::kernel::lanes::{GROUP_BITS, Real};
use crate::kernel::shared::Shared;
use crate::passes::{HighPhase, Pass, PhasePass, plan};
use crate::relabel;
use crate::rotations::{Block, Body, Rotations};
use crate::team::{Control, Run, run, workers_for};

/// A planned block.
enum Planned<T> {
    Passes(Vec<Pass<T>>, u64),
    Nested(Vec<Planned<T>>, u64),
}

impl<T: Real> Planned<T> {
    fn of(qubits: u32, block: &Block) -> Self {
        match &block.body {
            Body::List(list) => Self::Passes(plan(qubits, list), block.repeat),
            Body::Nested(blocks) => Self::Nested(blocks.iter().map(|b| Self::of(qubits, b)).collect(), block.repeat),
        }
    }

    fn passes(&self) -> u64 {
        match self {
            Self::Passes(passes, repeat) => (passes.len() as u64).saturating_mul(*repeat),
            Self::Nested(blocks, repeat) => {
                blocks.iter().fold(0, |sum: u64, b| sum.saturating_add(b.passes())).saturating_mul(*repeat)
            }
        }
    }
}

/// Applies `rotations`, their frame and their global phase to `amplitudes`, on up to `threads` workers.
///
/// Cost: see [`crate::passes`]. The result has the same bits for every number of threads and every instruction set.
///
/// # Errors
/// A length that is not 2^qubits; a stop on request, after which the state is that of the finished passes.
pub fn evolve<T: Real>(
    amplitudes: &mut [Complex<T>],
    rotations: &Rotations,
    threads: usize,
    control: &Control,
) -> Result<Run> {
    require_length(amplitudes.len(), rotations.qubits())?;
    let isa = Isa::chosen()?;
    let moves = rotations.frame().map_or(&[][..], Frame::relabelling);
    let trades = relabel::passes(moves);
    let turned = padded(amplitudes, |amplitudes| {
        let qubits = amplitudes.len().ilog2();
        let last = rotations.frame().map(|frame| Block { body: Body::List(frame.rotations().into()), repeat: 1 });
        let blocks = rotations.blocks().iter().chain(&last).map(|block| Planned::of(qubits, block));
        let blocks: Vec<Planned<T>> = blocks.collect();
        let eighths = rotations.frame().map_or(0, Frame::eighths);
        let phase = global_phase(rotations.phase() + f64::from(eighths) * FRAC_PI_4);
        let own = u64::from(phase.is_some()) + trades;
        let passes = blocks.iter().fold(own, |sum, block| sum.saturating_add(block.passes()));
        control.expect(control.progress().0.saturating_add(passes));
        let workers = workers_for(threads, amplitudes.len());
        let state = Shared::new(amplitudes);
        run(workers, control, |member| {
            let mut carrier = Carrier::new(isa, member, &state);
            carry_out(&mut carrier, &blocks)?;
            phase.as_ref().map_or(Ok(()), |phase| carrier.pass(phase))
        })
    })?;
    relabel::relabel(amplitudes, moves, control)?;
    Ok(Run { passes: turned.passes + trades, ..turned })
}

/// exp(i phase) as a pass, or None for phase 0.
fn global_phase<T: Real>(phase: f64) -> Option<Pass<T>> {
    let (sin, cos) = libm::sincos(phase);
    let everywhere = HighPhase { z: 0, cos_sin: (cos, -sin) };
    (phase != 0.0).then(|| Pass::Phase(PhasePass { table: vec![], high: vec![everywhere], crossing: vec![] }))
}

/// Refuses a state whose length is not 2^qubits.
///
/// # Errors
/// As said.
pub fn require_length(length: usize, qubits: u32) -> Result<()> {
    if length.is_power_of_two() && length.ilog2() == qubits {
        return Ok(());
    }
    Err(Error::StateShape {
        found: format!("{length} amplitudes for {qubits} qubits"),
        expected: format!("2**{qubits} amplitudes, or a circuit or operator on the state's own number of qubits"),
    })
}

/// Lets `work` see at least one whole group: shorter states are extended by zeros, which no string mixes in.
pub fn padded<T: Real, R>(amplitudes: &mut [Complex<T>], work: impl FnOnce(&mut [Complex<T>]) -> R) -> R {
    let least = 1 << GROUP_BITS;
    if amplitudes.len() >= least {
        return work(amplitudes);
    }
    let mut longer = amplitudes.to_vec();
    longer.resize(least, Complex::new(T::default(), T::default()));
    let result = work(&mut longer);
    let own = amplitudes.len();
    amplitudes.copy_from_slice(&longer[..own]);
    result
}

/// Carries out planned blocks, repeats and all.
fn carry_out<T: Real>(carrier: &mut Carrier<T>, blocks: &[Planned<T>]) -> Result<()> {
    for block in blocks {
        match block {
            Planned::Passes(passes, repeat) => {
                for _ in 0..*repeat {
                    passes.iter().try_for_each(|pass| carrier.pass(pass))?;
                }
            }
            Planned::Nested(blocks, repeat) => (0..*repeat).try_for_each(|_| carry_out(carrier, blocks))?,
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::kernel::rotate::Rotate;
    use crate::pauli::PauliString;
    use crate::rotations::Rotation;
    use num_complex::Complex64;

    /// A small generator of reproducible numbers in [0, 1): the constants of Knuth's linear congruential MMIX generator.
    fn numbers(seed: u64) -> impl FnMut() -> f64 {
        let mut state = seed;
        move || {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            (state >> 11) as f64 / (1u64 << 53) as f64
        }
    }

    fn random_state(qubits: u32, seed: u64) -> Vec<Complex64> {
        let mut next = numbers(seed);
        let state: Vec<_> = (0..1 << qubits).map(|_| Complex64::new(next() - 0.5, next() - 0.5)).collect();
        let norm = state.iter().map(|a| a.norm_sqr()).sum::<f64>().sqrt();
        state.into_iter().map(|a| a / norm).collect()
    }

    fn random_list(qubits: u32, count: usize, seed: u64) -> Vec<Rotation> {
        let mut next = numbers(seed);
        let mut mask = |density: f64| (0..qubits).fold(0u128, |m, q| if next() < density { m | 1 << q } else { m });
        let strings: Vec<_> =
            (0..count).map(|i| PauliString { x: if i % 3 == 0 { 0 } else { mask(0.3) }, z: mask(0.4) }).collect();
        let mut angle = numbers(seed + 1);
        strings.into_iter().map(|string| Rotation { string, angle: 6.0 * (angle() - 0.5) }).collect()
    }

    #[test]
    fn passes_do_what_the_twin_does_rotation_by_rotation() {
        for qubits in [1, 2, 3, 5, 10, 11, 13, 15, 16] {
            let list = random_list(qubits, 40, u64::from(qubits));
            let start = random_state(qubits, 7);
            let mut slow = start.clone();
            list.iter().for_each(|rotation| crate::twin::rotate(&mut slow, rotation));
            let circuit = Rotations::from_list(qubits, list, 0.0).unwrap();
            for threads in [1, 3] {
                let mut fast = start.clone();
                evolve(&mut fast, &circuit, threads, &Control::default()).unwrap();
                let distance = fast.iter().zip(&slow).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt();
                // Both sides round at most 5 u a rotation (docs of the Python engine bound), 40 rotations, u = 1.1e-16.
                assert!(distance < 2.0 * 40.0 * 5.0 * 1.2e-16, "{qubits} qubits: {distance:e}");
            }
        }
    }

    #[test]
    fn single_precision_follows_double_precision() {
        let list = random_list(15, 30, 3);
        let circuit = Rotations::from_list(15, list, 0.7).unwrap();
        let mut wide = random_state(15, 9);
        let mut narrow: Vec<Complex<f32>> = wide.iter().map(|a| Complex::new(a.re as f32, a.im as f32)).collect();
        evolve(&mut wide, &circuit, 2, &Control::default()).unwrap();
        evolve(&mut narrow, &circuit, 2, &Control::default()).unwrap();
        let difference =
            |(a, b): (&Complex64, &Complex<f32>)| (a - Complex64::new(b.re.into(), b.im.into())).norm_sqr();
        let distance = wide.iter().zip(&narrow).map(difference).sum::<f64>().sqrt();
        assert!(distance < 31.0 * 5.0 * 6e-8, "{distance:e}");
    }

    #[test]
    fn every_instruction_set_gives_the_same_bits() {
        let (list, start) = (random_list(14, 24, 5), random_state(14, 2));
        let lane_rotations = |isa: Isa| {
            let mut state = start.clone();
            let shared = Shared::new(&mut state);
            for pass in plan::<f64>(14, &list) {
                if let Pass::Single(rotation) = &pass {
                    let range = 0..rotation.units(shared.groups());
                    isa.run(Rotate { state: &shared, range, rotation, flip: 0, other_angle: 0 });
                }
            }
            state
        };
        let baseline = lane_rotations(Isa::BASELINE);
        assert!(Isa::available().into_iter().all(|isa| lane_rotations(isa) == baseline));
    }
}
