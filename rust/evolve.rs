//! Applies a circuit to a state vector in place.

use std::borrow::Cow;
use std::f64::consts::FRAC_PI_4;

use num_complex::Complex;

use crate::error::{Error, Result};
use crate::frame::Frame;
use crate::kernel::Isa;
use crate::kernel::carry::Carrier;
use crate::kernel::lanes::Real;
use crate::kernel::shared::Shared;
use crate::passes::{Pass, UNROLLED_LENGTH, UNROLLED_REPEATS, least_qubits, plan};
use crate::pauli::PauliString;
use crate::relabel;
use crate::rotations::{Block, Body, Rotation, Rotations};
use crate::team::{Control, Run, run, workers_for};

/// Planned blocks and how often they run.
#[derive(Clone, Debug)]
pub struct Planned<T: Real> {
    repeat: u64,
    content: Content<T>,
}

#[derive(Clone, Debug)]
enum Content<T: Real> {
    Passes(Vec<Pass<T>>),
    Nested(Vec<Planned<T>>),
}

impl<T: Real> Planned<T> {
    /// Plans a circuit with the rotations of its frame, the global phase last; a relabelling of qubits is left to do.
    ///
    /// # Errors
    /// A stop on request.
    pub fn circuit(rotations: &Rotations, control: &Control) -> Result<Self> {
        let qubits = rotations.qubits().max(least_qubits::<T>());
        let mut content = Self::blocks(qubits, rotations.blocks(), control)?;
        let clifford = rotations.frame().map(|frame| Block { body: Body::List(frame.rotations().into()), repeat: 1 });
        content.extend(Self::blocks(qubits, clifford.as_slice(), control)?);
        let phase = rotations.phase() + f64::from(rotations.frame().map_or(0, Frame::eighths)) * FRAC_PI_4;
        if phase != 0.0 {
            let identity = Rotation { string: PauliString { x: 0, z: 0 }, angle: -phase };
            content.push(Self { repeat: 1, content: Content::Passes(plan(qubits, &[identity], control)?) });
        }
        Ok(Self { repeat: 1, content: Content::Nested(content) })
    }

    /// Without blocks that do nothing, so that the last one has the last pass.
    fn blocks(qubits: u32, blocks: &[Block], control: &Control) -> Result<Vec<Self>> {
        let planned: Result<Vec<Self>> = blocks.iter().map(|block| Self::block(qubits, block, control)).collect();
        Ok(planned?.into_iter().filter(|block| block.passes() > 0).collect())
    }

    fn block(qubits: u32, block: &Block, control: &Control) -> Result<Self> {
        let repeat = block.repeat;
        let list = match &block.body {
            Body::Nested(blocks) => {
                return Ok(Self { repeat, content: Content::Nested(Self::blocks(qubits, blocks, control)?) });
            }
            Body::List(list) => list,
        };
        let mut parts = vec![];
        for (list, repeat) in together(list, repeat) {
            parts.push(Self { repeat, content: Content::Passes(plan(qubits, &list, control)?) });
        }
        Ok(Self { repeat: 1, content: Content::Nested(parts) })
    }

    /// Passes in all, saturating.
    pub fn passes(&self) -> u64 {
        let once = match &self.content {
            Content::Passes(passes) => passes.len() as u64,
            Content::Nested(blocks) => blocks.iter().fold(0, |sum: u64, block| sum.saturating_add(block.passes())),
        };
        once.saturating_mul(self.repeat)
    }

    /// Calls `take(passes, times)` for each planned list, with the number of times that it runs in all (saturating).
    pub fn each_list(&self, times: u64, take: &mut impl FnMut(&[Pass<T>], u64)) {
        let times = times.saturating_mul(self.repeat);
        match &self.content {
            Content::Passes(passes) => take(passes, times),
            Content::Nested(blocks) => blocks.iter().for_each(|block| block.each_list(times, take)),
        }
    }

    /// Carries everything out; `last` says that nothing follows.
    fn carry_out(&self, carrier: &mut Carrier<T>, last: bool) -> Result<()> {
        for round in 1..=self.repeat {
            let last = last && round == self.repeat;
            match &self.content {
                Content::Passes(passes) => {
                    for (place, pass) in passes.iter().enumerate() {
                        carrier.pass(pass, last && place + 1 == passes.len())?;
                    }
                }
                Content::Nested(blocks) => {
                    for (place, block) in blocks.iter().enumerate() {
                        block.carry_out(carrier, last && place + 1 == blocks.len())?;
                    }
                }
            }
        }
        Ok(())
    }
}

/// What is planned at once of a list that repeats, and how often that runs: several repeats, then those that are left.
pub fn together(list: &[Rotation], repeat: u64) -> Vec<(Cow<'_, [Rotation]>, u64)> {
    if repeat <= 1 || list.len() > UNROLLED_LENGTH {
        return vec![(Cow::Borrowed(list), repeat)];
    }
    let copies = |count: u64| Cow::Owned((0..count).flat_map(|_| list.iter().copied()).collect());
    let parts = [(UNROLLED_REPEATS, repeat / UNROLLED_REPEATS), (repeat % UNROLLED_REPEATS, 1)];
    parts.into_iter().filter(|(count, times)| count * times > 0).map(|(count, times)| (copies(count), times)).collect()
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
    let planned = Planned::<T>::circuit(rotations, control)?;
    let moves = rotations.frame().map_or(&[][..], Frame::relabelling);
    let trades = relabel::passes(moves);
    control.expect(control.progress().0.saturating_add(planned.passes()).saturating_add(trades));
    let turned = carry_out(isa, &planned, amplitudes, threads, control)?;
    relabel::relabel(amplitudes, moves, control)?;
    Ok(Run { passes: turned.passes + trades, ..turned })
}

fn carry_out<T: Real>(
    isa: Isa,
    planned: &Planned<T>,
    amplitudes: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    padded(amplitudes, 1 << least_qubits::<T>(), |amplitudes| {
        let workers = workers_for(threads, amplitudes.len());
        let state = Shared::new(amplitudes);
        run(workers, control, |member| planned.carry_out(&mut Carrier::new(isa, member, &state), true))
    })
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

/// Lets `work` see at least `least` amplitudes: shorter states are extended by zeros, which no string mixes in.
pub fn padded<T: Real, R>(amplitudes: &mut [Complex<T>], least: usize, work: impl FnOnce(&mut [Complex<T>]) -> R) -> R {
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

#[cfg(test)]
mod tests {
    use super::*;
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
    fn one_rotation_alone_does_what_the_twin_does_with_the_same_bits_everywhere() {
        for qubits in [3, 6, 7, 9, 12, 16] {
            let start = random_state(qubits, 5);
            let identity = Rotation { string: PauliString { x: 0, z: 0 }, angle: 0.3 };
            let all = Rotation { string: PauliString { x: (1 << qubits) - 1, z: (1 << qubits) - 1 }, angle: -2.0 };
            for rotation in random_list(qubits, 24, 3 * u64::from(qubits)).into_iter().chain([identity, all]) {
                let circuit = Rotations::from_list(qubits, vec![rotation], 0.0).unwrap();
                let planned = Planned::<f64>::circuit(&circuit, &Control::default()).unwrap();
                let end = |isa: Isa, threads: usize| {
                    let mut state = start.clone();
                    carry_out(isa, &planned, &mut state, threads, &Control::default()).unwrap();
                    state
                };
                let fast = end(Isa::BASELINE, 1);
                let mut slow = start.clone();
                crate::twin::rotate(&mut slow, &rotation);
                let distance = fast.iter().zip(&slow).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt();
                // Both sides round at most 5 u, u = 1.1e-16.
                assert!(distance < 2.0 * 5.0 * 1.2e-16, "{qubits} qubits, {rotation:?}: {distance:e}");
                assert!(Isa::available().into_iter().all(|isa| end(isa, 1) == fast && end(isa, 3) == fast));
            }
        }
    }

    /// Bonds of all kinds, hopping with strings between, excitations, couplings of all pairs, in both orders.
    fn structured_list(qubits: u32) -> Vec<Rotation> {
        let mut list = vec![];
        let mut push = |x: u128, z: u128, angle: f64| list.push(Rotation { string: PauliString { x, z }, angle });
        for q in 0..qubits {
            let partner = (q + 1 + q % 3) % qubits;
            let bond = 1u128 << q | 1u128 << partner;
            let between = ((1u128 << q.max(partner)) - 1) & !((2u128 << q.min(partner)) - 1);
            match q % 5 {
                0 => [(bond, 0, 0.3), (bond, bond, 0.3), (0, bond, 0.3)].map(|(x, z, a)| push(x, z, a)),
                1 => [(0, bond, 0.2), (bond, bond, 0.4), (bond, 0, -0.3)].map(|(x, z, a)| push(x, z, a)),
                2 => [(bond, between, 0.7), (bond, between | bond, 0.7), (0, bond, 2.0)].map(|(x, z, a)| push(x, z, a)),
                3 => [(bond, 1 << q, 0.4), (bond, 1 << partner, -0.4), (1 << q, 0, 1.4)].map(|(x, z, a)| push(x, z, a)),
                _ => [(bond, 0, 1.2), (bond, bond, -0.4), (0, bond, 0.9)].map(|(x, z, a)| push(x, z, a)),
            };
        }
        for a in 0..qubits {
            (0..a).for_each(|b| push(0, 1 << a | 1 << b, 0.01 * f64::from(a + b)));
        }
        for k in 0..8u128 {
            let ends = 1u128 | 1 << (qubits / 3) | 1 << (qubits / 2) | 1 << (qubits - 1);
            let own = [1u128, 1 << (qubits / 3), 8];
            let z = (0..3).filter(|j| k >> j & 1 == 1).fold(0, |z, j| z ^ own[j]);
            push(ends, z, 0.1);
        }
        let back: Vec<Rotation> = list.iter().rev().copied().collect();
        list.into_iter().chain(back).collect()
    }

    #[test]
    fn structured_lists_do_what_the_twin_does_and_keep_the_norm() {
        for qubits in [6, 9, 12, 16, 17] {
            let list = structured_list(qubits);
            let start = random_state(qubits, 11);
            let mut slow = start.clone();
            list.iter().for_each(|rotation| crate::twin::rotate(&mut slow, rotation));
            let mut fast = start.clone();
            let circuit = Rotations::from_list(qubits, list.clone(), 0.0).unwrap();
            evolve(&mut fast, &circuit, 2, &Control::default()).unwrap();
            let distance = fast.iter().zip(&slow).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt();
            assert!(distance < 2e-16 * list.len() as f64 + 1e-14, "{qubits} qubits: {distance:e}");
            let norm = |state: &[Complex64]| state.iter().map(|a| a.norm_sqr()).sum::<f64>();
            assert!((norm(&fast) / norm(&start) - 1.0).abs() < 1e-14 * 2.0, "{qubits} qubits");
        }
    }

    #[test]
    fn repeats_planned_together_do_what_single_ones_do() {
        let (qubits, list) = (16, structured_list(16)[..60].to_vec());
        let step = Rotations::from_list(qubits, list, 0.1).unwrap();
        let start = random_state(qubits, 4);
        for repeat in [1u64, 3, 4, 7] {
            let (mut one_by_one, mut at_once) = (start.clone(), start.clone());
            for _ in 0..repeat {
                evolve(&mut one_by_one, &step, 1, &Control::default()).unwrap();
            }
            evolve(&mut at_once, &step.times(repeat).unwrap(), 1, &Control::default()).unwrap();
            let distance = one_by_one.iter().zip(&at_once).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt();
            assert!(distance < repeat as f64 * (2.0 * 2e-16 * 61.0) + 2e-14, "{repeat}: {distance:e}");
        }
    }

    #[test]
    fn a_stopped_run_leaves_the_state_of_the_finished_passes() {
        // A chain of XX on 17 qubits: the first pass holds the eleven lowest, and leaves the product of their cosines to the
        // second.
        let qubits = 17;
        let list: Vec<_> =
            (0..qubits - 1).map(|q| Rotation { string: PauliString { x: 3 << q, z: 0 }, angle: 0.4 }).collect();
        let circuit = Rotations::from_list(qubits, list.clone(), 0.0).unwrap();
        let planned = Planned::<f64>::circuit(&circuit, &Control::default()).unwrap();
        assert_eq!(planned.passes(), 2);
        let start = random_state(qubits, 8);
        let mut slow = start.clone();
        list[..11].iter().for_each(|rotation| crate::twin::rotate(&mut slow, rotation));
        for threads in [1, 2] {
            let (mut stopped, control) = (start.clone(), Control::default());
            control.request_stop();
            let outcome = carry_out(Isa::chosen().unwrap(), &planned, &mut stopped, threads, &control);
            assert!(matches!(outcome, Err(Error::Cancelled { .. })));
            let distance = stopped.iter().zip(&slow).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt();
            // Eleven rotations of 8 u on one side, of 5 u on the other, and one product of 3 u; u = 1.1e-16.
            assert!(distance < (11.0 * 13.0 + 3.0) * 1.2e-16, "{threads} threads: {distance:e}");
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
        for qubits in [5, 14, 17] {
            let (list, start) = (random_list(qubits, 60, 5), random_state(qubits, 2));
            let planned =
                Planned::<f64>::circuit(&Rotations::from_list(qubits, list, 0.3).unwrap(), &Control::default())
                    .unwrap();
            let end = |isa: Isa| {
                let mut state = start.clone();
                carry_out(isa, &planned, &mut state, 1, &Control::default()).unwrap();
                state
            };
            let baseline = end(Isa::BASELINE);
            assert!(Isa::available().into_iter().all(|isa| end(isa) == baseline));
        }
    }
}
