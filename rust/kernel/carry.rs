//! Carries the passes of [`crate::passes`] out: each worker its share of groups, blocks or cosets, in place.

use num_complex::Complex;

use super::blocks::{LaneFactors, Multiply};
use super::lanes::{GROUP_BITS, LANES, Real};
use super::rotate::{LaneRotation, Rotate};
use super::shared::{Shared, as_groups_mut};
use super::{Isa, Work};
use crate::error::Result;
use crate::passes::{BLOCK_BITS, COSET_BITS, CosetRotation, FusedPass, Pass, PhasePass, high_phase};
use crate::team::Member;

/// Groups that a worker handles between two looks at the flags.
const PIECE: usize = 1 << 13;

/// Groups of a coset that stay in first-level cache: 2^10 amplitudes.
const INNER_GROUPS: usize = 1 << (10 - GROUP_BITS);

/// One worker's hands on a state.
pub struct Carrier<'a, T: Real> {
    isa: Isa,
    member: &'a Member<'a>,
    state: &'a Shared<'a, T>,
    coset: Vec<Complex<T>>,
}

impl<'a, T: Real> Carrier<'a, T> {
    /// Hands on `state` for one member of a team, all of whose members carry out the same passes in the same order.
    pub fn new(isa: Isa, member: &'a Member<'a>, state: &'a Shared<'a, T>) -> Self {
        Self { isa, member, state, coset: vec![] }
    }

    /// Carries out this member's share of a pass and waits for the others.
    ///
    /// # Errors
    /// As [`Member::pass_done`] and [`Member::each_piece`].
    pub fn pass(&mut self, pass: &Pass<T>) -> Result<()> {
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
                    let offsets = &pass.offsets;
                    isa.run(Move { state, coset: &mut *coset, offsets, rep, way: Way::In });
                    rotate_coset(isa, coset, pass, rep);
                    isa.run(Move { state, coset: &mut *coset, offsets, rep, way: Way::Out });
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

/// Which way a coset moves.
#[derive(Clone, Copy)]
enum Way {
    In,
    Out,
}

/// Moves a coset between the state and the buffer, run by run.
struct Move<'a, T: Real> {
    state: &'a Shared<'a, T>,
    coset: &'a mut [[T; LANES]],
    offsets: &'a [usize],
    rep: usize,
    way: Way,
}

impl<T: Real> Work for Move<'_, T> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        const RUN_GROUPS: usize = FusedPass::<f64>::RUN >> GROUP_BITS;
        let (runs, _) = self.coset.as_chunks_mut::<RUN_GROUPS>();
        for (own, offset) in runs.iter_mut().zip(self.offsets) {
            // SAFETY: the runs of a coset are disjoint, cosets are disjoint, and each belongs to one piece of one worker;
            // `run` is the only piece of the state in use here.
            let run = unsafe { self.state.groups_mut((self.rep ^ offset) >> GROUP_BITS, RUN_GROUPS) };
            match self.way {
                Way::In => own.copy_from_slice(run),
                Way::Out => run.copy_from_slice(own),
            }
        }
    }
}
