//! Turns a list of rotations into passes over the state vector.
//!
//! The plain way costs one traversal of memory for each rotation. Two ideas save traversals:
//!
//! **Fuse.** The x masks of a run of rotations span a space over GF(2). Together with the lowest few unit vectors (so
//! that memory is read in contiguous runs) it has some basis v_0 … v_{k-1}, and every rotation of the run only mixes
//! amplitudes inside a *coset* `rep ^ span`. So gather one coset of 2^k amplitudes into cache, apply the whole run to it,
//! write it back: one traversal for the run. Inside a coset a string is again a string on k qubits: coordinate i of an
//! index is its bit at the pivot of v_i, the local x mask collects the bits of x at the pivots, bit i of the local z mask is
//! the parity of `v_i & z`, and the parity of `rep & z` is a sign common to the coset.
//!
//! **Phase.** Diagonal strings commute, so a run of them is one traversal that multiplies each amplitude by a phase. Cut
//! the index into high bits and the low bits of a block: strings on low bits alone make a table of 2^L phases, those on
//! high bits alone one phase a block, and those on both act on the block as one diagonal string for each low mask.
//!
//! Worked example on three qubits: X_2, then Z_0 Z_1, then X_2 X_0, with k = 2 and no forced low bits. The span of 0b100
//! and 0b101 has the reduced basis v_0 = 0b001, v_1 = 0b100, cosets {0, 1, 4, 5} and {2, 3, 6, 7}. X_2 and X_2 X_0 would
//! share a pass with local masks 0b10 and 0b11, but Z_0 Z_1 stands between and anticommutes with X_2 X_0, so it does not
//! move past it: three passes here.
//!
//! Before all that, commuting rotations about strings with one x mask join in pairs ([`crate::operation`]).
//!
//! The planner is greedy: it opens a pass with the first rotation that is left and takes every later one that fits and
//! commutes with all that it skipped. Plans depend on the list and the number of qubits only, never on the machine, so
//! results keep their bits. The rotations are never re-ordered otherwise.

use num_complex::Complex;

use crate::kernel::blocks::LaneFactors;
use crate::kernel::lanes::{GROUP_BITS, Real};
use crate::kernel::rotate::LaneRotation;
use crate::operation::{Operation, joined};
use crate::rotations::Rotation;

/// Low bits of a block of a phase pass: 2^9 amplitudes and their factors stay in first-level cache together.
pub const BLOCK_BITS: u32 = 9;
/// Dimension of a coset: 2^12 amplitudes stay in second-level cache.
pub const COSET_BITS: u32 = 12;
/// Lowest bits that every coset contains, so that it is read in runs of 16 amplitudes, four cache lines.
const RUN_BITS: u32 = 4;
/// States below this many qubits stay in cache as a whole and gain nothing from fusing.
const FUSE_FROM: u32 = 15;
/// How many rotations a pass may skip before it is closed.
const LOOK_AHEAD: usize = 192;

/// An operation on masks of at most 64 bits, ready for the kernels.
fn lane_rotation<T: Real>(operation: &Operation) -> LaneRotation<T> {
    let string = operation.first.string;
    let (x, z, d) = (string.x as u64, string.z as u64, operation.parity_mask() as u64);
    LaneRotation::new(x, z, d, string.y_count(), operation.angles())
}

/// One traversal of the state vector.
#[derive(Clone, Debug)]
pub enum Pass<T> {
    /// One rotation.
    Single(LaneRotation<T>),
    /// Several diagonal rotations at once.
    Phase(PhasePass<T>),
    /// Several rotations on cosets.
    Fused(FusedPass<T>),
}

/// A diagonal string on high bits: its mask above the block, and cos θ, sin θ.
#[derive(Clone, Copy, Debug)]
pub struct HighPhase {
    /// Mask, shifted down by [`BLOCK_BITS`].
    pub z: usize,
    /// Cosine and sine of the angle.
    pub cos_sin: (f64, f64),
}

/// Diagonal rotations sorted by where they act.
#[derive(Clone, Debug)]
pub struct PhasePass<T> {
    /// Phases of the strings on low bits alone, empty where there are none.
    pub table: Vec<LaneFactors<T>>,
    /// Strings on high bits alone.
    pub high: Vec<HighPhase>,
    /// Strings on both, by low mask.
    pub crossing: Vec<(u64, Vec<HighPhase>)>,
}

/// A rotation in the coordinates of a coset, with the masks whose parity over the representative turns its sign and its
/// angle.
#[derive(Clone, Debug)]
pub struct CosetRotation<T> {
    /// The rotation on local bits.
    pub rotation: LaneRotation<T>,
    /// Mask of the sign.
    pub z: usize,
    /// Mask of the angle.
    pub d: usize,
}

/// Rotations that act inside cosets.
#[derive(Clone, Debug)]
pub struct FusedPass<T> {
    /// Reduced basis with ascending pivots; the first [`RUN_BITS`] are unit vectors.
    basis: Vec<u64>,
    /// The rotations in local coordinates.
    pub rotations: Vec<CosetRotation<T>>,
    /// Where run `i` of a coset starts, relative to its representative.
    pub offsets: Vec<usize>,
    /// Whether cosets are contiguous blocks, so that no gathering is needed.
    pub contiguous: bool,
}

impl<T> FusedPass<T> {
    /// Amplitudes in one contiguous run.
    pub const RUN: usize = 1 << RUN_BITS;

    /// The representative of coset `number`: its bits laid out on the positions that are no pivots.
    pub fn representative(&self, number: usize) -> usize {
        let pivots = self.basis.iter().fold(0u64, |mask, v| mask | 1 << v.ilog2());
        let (mut rep, mut rest, mut position) = (0u64, number as u64, 0u32);
        while rest != 0 {
            if pivots >> position & 1 == 0 {
                rep |= (rest & 1) << position;
                rest >>= 1;
            }
            position += 1;
        }
        rep as usize
    }
}

/// Plans a list on `qubits` qubits. Every rotation of the list ends up in exactly one pass.
pub fn plan<T: Real>(qubits: u32, list: &[Rotation]) -> Vec<Pass<T>> {
    let list = &joined(list)[..];
    let mut passes = Vec::new();
    let mut taken = vec![false; list.len()];
    let mut first = 0;
    while first < list.len() {
        if taken[first] {
            first += 1;
            continue;
        }
        let opening = &list[first];
        let gathered = if opening.x() == 0 && qubits > BLOCK_BITS {
            gather(list, &taken, first, |operation| operation.x() == 0)
        } else if opening.x() != 0 && qubits >= FUSE_FROM {
            let mut span = Span::of_low_bits(RUN_BITS);
            gather(list, &taken, first, |o| o.x() != 0 && span.admit(o.x() as u64, COSET_BITS))
        } else {
            vec![first]
        };
        gathered.iter().for_each(|&place| taken[place] = true);
        let members: Vec<&Operation> = gathered.iter().map(|&place| &list[place]).collect();
        passes.push(match members.as_slice() {
            [one] => Pass::Single(lane_rotation(one)),
            _ if opening.x() == 0 => Pass::Phase(phase_pass(&members)),
            _ => Pass::Fused(fused_pass(&members)),
        });
    }
    passes
}

/// Places, from `first` on, of operations that `fits` admits and that commute with all that were skipped before them.
fn gather(list: &[Operation], taken: &[bool], first: usize, mut fits: impl FnMut(&Operation) -> bool) -> Vec<usize> {
    let mut members = Vec::new();
    let mut skipped: Vec<&Operation> = Vec::new();
    for place in (first..list.len()).filter(|&place| !taken[place]) {
        let operation = &list[place];
        if skipped.iter().all(|s| s.commutes_with_all_of(operation)) && fits(operation) {
            members.push(place);
        } else {
            skipped.push(operation);
            if skipped.len() == LOOK_AHEAD {
                break;
            }
        }
    }
    members
}

/// A subspace over GF(2) in reduced echelon form, pivots being highest bits.
struct Span {
    basis: Vec<u64>,
}

impl Span {
    fn of_low_bits(bits: u32) -> Self {
        Self { basis: (0..bits).map(|bit| 1 << bit).collect() }
    }

    fn reduce(&self, vector: u64) -> u64 {
        self.basis.iter().fold(vector, |rest, v| if rest >> v.ilog2() & 1 == 1 { rest ^ v } else { rest })
    }

    /// Makes the span contain `vector` if its dimension then stays within `limit`; says whether it does.
    fn admit(&mut self, vector: u64, limit: u32) -> bool {
        let rest = self.reduce(vector);
        if rest == 0 {
            return true;
        }
        if self.basis.len() as u32 == limit {
            return false;
        }
        for v in &mut self.basis {
            if *v >> rest.ilog2() & 1 == 1 {
                *v ^= rest;
            }
        }
        self.basis.push(rest);
        true
    }

    /// Fills up with the lowest unit vectors that are missing, and sorts by pivot.
    fn filled(mut self, dimension: u32) -> Vec<u64> {
        let mut bit = 0;
        while (self.basis.len() as u32) < dimension {
            self.admit(1 << bit, dimension);
            bit += 1;
        }
        self.basis.sort_by_key(|v| v.ilog2());
        self.basis
    }
}

fn fused_pass<T: Real>(members: &[&Operation]) -> FusedPass<T> {
    let mut span = Span::of_low_bits(RUN_BITS);
    for operation in members {
        span.admit(operation.x() as u64, COSET_BITS);
    }
    let basis = span.filled(COSET_BITS);
    let at_pivots = |x: u64| basis.iter().enumerate().fold(0, |m, (i, v)| m | (x >> v.ilog2() & 1) << i);
    let by_parity = |z: u64| basis.iter().enumerate().fold(0, |m, (i, v)| m | u64::from((v & z).count_ones() & 1) << i);
    let local = |operation: &&Operation| {
        let string = operation.first.string;
        let (z, d) = (string.z as u64, operation.parity_mask() as u64);
        let x = at_pivots(string.x as u64);
        let rotation = LaneRotation::new(x, by_parity(z), by_parity(d), string.y_count(), operation.angles());
        CosetRotation { rotation, z: z as usize, d: d as usize }
    };
    let rotations = members.iter().map(local).collect();
    let upper = &basis[RUN_BITS as usize..];
    let offsets = (0..1usize << upper.len())
        .map(|run| upper.iter().enumerate().fold(0, |at, (i, v)| if run >> i & 1 == 1 { at ^ *v as usize } else { at }))
        .collect();
    let contiguous = basis.iter().enumerate().all(|(i, v)| *v == 1 << i);
    FusedPass { basis, rotations, offsets, contiguous }
}

fn phase_pass<T: Real>(members: &[&Operation]) -> PhasePass<T> {
    let low_mask = (1u64 << BLOCK_BITS) - 1;
    let mut table: Vec<Complex<f64>> = Vec::new();
    let mut high = Vec::new();
    let mut crossing: Vec<(u64, Vec<HighPhase>)> = Vec::new();
    for Operation { first: rotation, .. } in members {
        let z = rotation.string.z as u64;
        let (sin, cos) = libm::sincos(rotation.angle);
        let part = HighPhase { z: (z >> BLOCK_BITS) as usize, cos_sin: (cos, sin) };
        match (z & low_mask, z >> BLOCK_BITS) {
            (0, _) => high.push(part),
            (low, 0) => {
                table.resize(1 << BLOCK_BITS, Complex::new(1.0, 0.0));
                for (index, phase) in table.iter_mut().enumerate() {
                    *phase *= phase_of(cos, sin, index & low as usize);
                }
            }
            (low, _) => match crossing.iter_mut().find(|(mask, _)| *mask == low) {
                Some((_, parts)) => parts.push(part),
                None => crossing.push((low, vec![part])),
            },
        }
    }
    let table = table.chunks_exact(1 << GROUP_BITS).map(|phases| LaneFactors::new(|place| phases[place])).collect();
    PhasePass { table, high, crossing }
}

/// exp(-i θ σ) where σ is the sign of the masked index.
fn phase_of(cos: f64, sin: f64, masked: usize) -> Complex<f64> {
    Complex::new(cos, if masked.count_ones() & 1 == 1 { sin } else { -sin })
}

/// The phase that strings on high bits give to block `block`.
pub fn high_phase(parts: &[HighPhase], block: usize) -> Complex<f64> {
    let one = |part: &HighPhase| phase_of(part.cos_sin.0, part.cos_sin.1, block & part.z);
    parts.iter().map(one).reduce(|product, phase| product * phase).unwrap_or(Complex::new(1.0, 0.0))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::pauli::PauliString;

    fn rotation(x: u128, z: u128) -> Rotation {
        Rotation { string: PauliString { x, z }, angle: 0.1 }
    }

    #[test]
    fn a_span_is_reduced_and_refuses_to_grow_past_its_limit() {
        let mut span = Span::of_low_bits(1);
        assert!(span.admit(0b110, 3) && span.admit(0b100, 3));
        assert!(span.admit(0b010, 3), "already inside");
        assert!(!span.admit(0b1000, 3));
        assert_eq!(span.filled(3), [0b001, 0b010, 0b100]);
    }

    #[test]
    fn diagonal_strings_share_a_pass_and_do_not_move_past_what_they_anticommute_with() {
        let list = [rotation(0, 0b11), rotation(1 << 12, 0), rotation(0, 0b110), rotation(0, 3 << 12)];
        let passes = plan::<f64>(14, &list);
        assert!(
            matches!(&passes[0], Pass::Phase(pass) if pass.table.len() == 1 << (BLOCK_BITS - GROUP_BITS) && pass.high.is_empty())
        );
        assert_eq!(passes.len(), 3);
    }

    #[test]
    fn a_chain_of_bonds_takes_as_many_passes_as_its_span_needs() {
        // Low bits 0 to 3, then one more dimension for each bond that leaves them: 11 bonds, then 8, of which 7 are left.
        let list: Vec<_> = (0..18).map(|q| rotation(3 << q, 0)).collect();
        let members = |pass: &Pass<f64>| match pass {
            Pass::Fused(fused) => fused.rotations.len(),
            _ => 1,
        };
        assert_eq!(plan::<f64>(19, &list).iter().map(members).collect::<Vec<_>>(), [11, 7]);
    }

    #[test]
    fn cosets_cover_the_index_space_once() {
        let list = [rotation(1 << 14, 0), rotation(0b11 << 13 | 1, 1)];
        let Pass::Fused(pass) = &plan::<f64>(15, &list)[0] else { panic!("one fused pass was due") };
        let mut seen = vec![0; 1 << 15];
        for number in 0..1 << (15 - COSET_BITS) {
            let rep = pass.representative(number);
            for offset in &pass.offsets {
                (0..FusedPass::<f64>::RUN).for_each(|within| seen[rep ^ offset ^ within] += 1);
            }
        }
        assert!(seen.iter().all(|&count| count == 1));
    }
}
