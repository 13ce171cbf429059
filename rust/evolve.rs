//! Applies a circuit to a state vector in place.

use num_complex::Complex;

use crate::error::{Error, Result};
use crate::kernel::Isa;
use crate::kernel::blocks::{LaneFactors, Multiply};
use crate::kernel::lanes::{GROUP_BITS, LANES, Real};
use crate::kernel::rotate::{LaneRotation, Rotate};
use crate::kernel::shared::{Shared, as_groups_mut};
use crate::passes::{BLOCK_BITS, COSET_BITS, CosetRotation, FusedPass, HighPhase, Pass, PhasePass, high_phase, plan};
use crate::rotations::{Block, Body, Rotations};
use crate::team::{Control, Member, Run, run, workers_for};

/// Groups that a worker handles between two looks at the flags.
const PIECE: usize = 1 << 13;

/// Groups of a coset that stay in first-level cache: 2^10 amplitudes.
const INNER_GROUPS: usize = 1 << (10 - GROUP_BITS);

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

/// Applies `rotations` and their global phase to `amplitudes`, on up to `threads` workers.
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
    padded(amplitudes, |amplitudes| {
        let qubits = amplitudes.len().ilog2();
        let blocks: Vec<Planned<T>> = rotations.blocks().iter().map(|block| Planned::of(qubits, block)).collect();
        let phase = global_phase(rotations.phase());
        let passes = blocks.iter().fold(u64::from(phase.is_some()), |sum, block| sum.saturating_add(block.passes()));
        control.expect(control.progress().0.saturating_add(passes));
        let workers = workers_for(threads, amplitudes.len());
        let state = Shared::new(amplitudes);
        run(workers, control, |member| {
            let mut worker = Worker { isa, member, state: &state, coset: vec![] };
            worker.blocks(&blocks)?;
            phase.as_ref().map_or(Ok(()), |phase| worker.pass(&Pass::Phase(phase.clone())))
        })
    })
}

/// exp(i phase) as a pass, or None for phase 0.
fn global_phase<T: Real>(phase: f64) -> Option<PhasePass<T>> {
    let (sin, cos) = libm::sincos(phase);
    let everywhere = HighPhase { z: 0, cos_sin: (cos, -sin) };
    (phase != 0.0).then(|| PhasePass { table: vec![], high: vec![everywhere], crossing: vec![] })
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

struct Worker<'a, T: Real> {
    isa: Isa,
    member: &'a Member<'a>,
    state: &'a Shared<'a, T>,
    coset: Vec<Complex<T>>,
}

impl<T: Real> Worker<'_, T> {
    fn blocks(&mut self, blocks: &[Planned<T>]) -> Result<()> {
        for block in blocks {
            match block {
                Planned::Passes(passes, repeat) => {
                    for _ in 0..*repeat {
                        passes.iter().try_for_each(|pass| self.pass(pass))?;
                    }
                }
                Planned::Nested(blocks, repeat) => (0..*repeat).try_for_each(|_| self.blocks(blocks))?,
            }
        }
        Ok(())
    }

    fn pass(&mut self, pass: &Pass<T>) -> Result<()> {
        match pass {
            Pass::Single(rotation) => self.single(rotation)?,
            Pass::Phase(phase) => self.phase(phase)?,
            Pass::Fused(fused) => self.fused(fused)?,
        }
        self.member.pass_done()
    }

    fn single(&self, rotation: &LaneRotation<T>) -> Result<()> {
        self.member.each_piece(rotation.units(self.state.groups()), PIECE, |range| {
            self.isa.run(Rotate { state: self.state, range, rotation, flip: 0, other_angle: 0 });
        })
    }

    fn phase(&self, phase: &PhasePass<T>) -> Result<()> {
        let groups = self.state.groups().min(1 << (BLOCK_BITS - GROUP_BITS));
        let bits = groups.ilog2() + GROUP_BITS;
        self.member.each_piece(self.state.groups() / groups, PIECE / groups, |blocks| {
            for block in blocks {
                // SAFETY: each block number belongs to one piece of one worker.
                let amplitudes = unsafe { self.state.groups_mut(block * groups, groups) };
                let high = block << bits >> BLOCK_BITS;
                if !phase.high.is_empty() || !phase.table.is_empty() {
                    let all = high_phase(&phase.high, high);
                    let all = LaneFactors::new(|_| all);
                    self.isa.run(Multiply { block: &mut *amplitudes, table: &phase.table, all });
                }
                let block = Shared::over(amplitudes);
                for (low, parts) in &phase.crossing {
                    let rotation = LaneRotation::diagonal(*low, high_phase(parts, high));
                    let range = 0..groups;
                    self.isa.run(Rotate { state: &block, range, rotation: &rotation, flip: 0, other_angle: 0 });
                }
            }
        })
    }

    fn fused(&mut self, pass: &FusedPass<T>) -> Result<()> {
        let size = 1usize << COSET_BITS;
        let groups = size >> GROUP_BITS;
        let (isa, state, member) = (self.isa, self.state, self.member);
        self.coset.resize(size, Complex::new(T::default(), T::default()));
        let coset = as_groups_mut(&mut self.coset);
        member.each_piece(state.groups() / groups, 8, |numbers| {
            for number in numbers {
                let rep = pass.representative(number);
                if pass.contiguous {
                    // SAFETY: coset `number` is the block of groups that starts at its representative; cosets are disjoint
                    // and each belongs to one piece of one worker.
                    let block = unsafe { state.groups_mut(rep >> GROUP_BITS, groups) };
                    rotate_coset(isa, block, pass, rep);
                } else {
                    move_runs(state, coset, pass, rep, |run, own| own.copy_from_slice(run));
                    rotate_coset(isa, coset, pass, rep);
                    move_runs(state, coset, pass, rep, |run, own| run.copy_from_slice(own));
                }
            }
        })
    }
}

/// Applies the rotations of a pass to one coset, as many in a row as possible to one first-level block after the other.
fn rotate_coset<T: Real>(isa: Isa, block: &mut [[T; LANES]], pass: &FusedPass<T>, rep: usize) {
    let groups = block.len();
    let inner = groups.min(INNER_GROUPS);
    let block = Shared::over(block);
    let parity = |mask: usize| (rep & mask).count_ones() as usize & 1;
    let apply = |CosetRotation { rotation, z, d }: &CosetRotation<T>, part: usize, parts: usize| {
        let units = rotation.units(groups) / parts;
        let range = part * units..(part + 1) * units;
        isa.run(Rotate { state: &block, range, rotation, flip: parity(*z), other_angle: parity(*d) });
    };
    let stays = |member: &CosetRotation<T>| member.rotation.stays_within(inner);
    for run in pass.rotations.chunk_by(|one, next| stays(one) && stays(next)) {
        let parts = if stays(&run[0]) { groups / inner } else { 1 };
        for part in 0..parts {
            run.iter().for_each(|member| apply(member, part, parts));
        }
    }
}

/// Walks through the runs of a coset in the state and their places in the buffer.
fn move_runs<T: Real>(
    state: &Shared<T>,
    coset: &mut [[T; LANES]],
    pass: &FusedPass<T>,
    rep: usize,
    copy: impl Fn(&mut [[T; LANES]], &mut [[T; LANES]]),
) {
    let run_groups = FusedPass::<T>::RUN >> GROUP_BITS;
    for (own, offset) in coset.chunks_exact_mut(run_groups).zip(&pass.offsets) {
        // SAFETY: the runs of a coset are disjoint, cosets are disjoint, and each belongs to one piece of one worker; `run`
        // is the only piece of the state in use here.
        let run = unsafe { state.groups_mut((rep ^ offset) >> GROUP_BITS, run_groups) };
        copy(run, own);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
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
