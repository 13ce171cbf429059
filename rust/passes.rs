//! Turns a list of rotations into passes over the state vector.
//!
//! The plain way costs one traversal of memory for each rotation. Three ideas make a step of many rotations cost a few.
//!
//! **Join** ([`crate::operation`]). Commuting strings with one x mask act as one operation, diagonal strings as one.
//!
//! **Fuse.** The x masks of a run of operations span a space over GF(2). Together with the lowest few unit vectors (so
//! that memory is read in contiguous pieces) it has some basis v_0 … v_{k-1}, and every operation of the run only mixes
//! amplitudes inside a *coset* `rep ^ span`. So take one coset of 2^k amplitudes into cache, apply the whole run to it,
//! write it back: one traversal for the run. Inside a coset a string is again a string on k qubits: coordinate i of an
//! index is its bit at the pivot of v_i, the local x mask collects the bits of x at the pivots, bit i of the local z mask is
//! the parity of `v_i & z`, and the parity of `rep & z` is a sign common to the coset ([`space`]). Where the span is that of the
//! lowest k qubits, cosets are contiguous blocks and nothing is moved at all.
//!
//! A list of one rotation, or of two, is not worth any of this ([`single`]).
//!
//! **Tile** ([`tiles`]). In cache, the operations of a run are sorted again by what fits into registers together.
//!
//! Worked example on three qubits: X_2, then Z_0 Z_1, then X_2 X_0, with k = 2 and no forced low bits. The span of 0b100
//! and 0b101 has the reduced basis v_0 = 0b001, v_1 = 0b100, cosets {0, 1, 4, 5} and {2, 3, 6, 7}. X_2 and X_2 X_0 have the
//! local masks 0b10 and 0b11. Z_0 Z_1 is Z_0 in these coordinates (v_0 & 0b011 is odd) times the sign of qubit 1, which is
//! -1 on the coset of representative 2. It commutes with X_2 and stands before X_2 X_0, so all three share one pass: on
//! {2, 3, 6, 7} first 2 ↔ 6 and 3 ↔ 7 mix, then amplitudes 2 and 6 get the phase of -Z_0, 3 and 7 its inverse, then
//! 2 ↔ 7 and 3 ↔ 6 mix.
//!
//! The planner is greedy: it opens a pass, takes every later operation that fits and commutes with all that it skipped,
//! tries this with the lowest k qubits and with a gathered span, and keeps the one that takes more rotations. All this is
//! done for two k, and the larger one is kept where it saves passes. Plans depend
//! on the list and the number of qubits only, never on the machine, so results keep their bits. Operations are not re-ordered
//! otherwise. A body that repeats is planned over a few repeats at once, so that the last pass of a step also does the
//! beginning of the next ([`UNROLLED_REPEATS`]).
//!
//! Tried and left out: blocks of 2^14 amplitudes (often no faster) and of 2^15 (slower on processors whose second-level cache
//! is half a megabyte); non-temporal stores; index swizzling against cache set conflicts.

pub mod diagonal;
pub mod layout;
pub mod single;
pub mod space;
pub mod spread;
pub mod tile_operation;
pub mod tiles;

use num_complex::Complex64;

use crate::error::Result;
use crate::kernel::lanes::Real;
use crate::operation::{Operation, joined};
use crate::rotations::Rotation;
use crate::team::Control;
use layout::Layout;
use single::Single;
use space::{Space, Span};
use tiles::{ONE, TILE_BITS, Work};

/// States of at most this many qubits are one coset.
pub const WHOLE_BITS: u32 = 15;
/// Vectors in a coset of larger states, as powers of two: the second where it saves passes.
const COSET_BITS: [u32; 2] = [9, 10];
/// Lone rotations up to which a list is carried out one by one on states of several cosets: a pass for two saves nothing.
const FEW: usize = 2;
/// Least dimension of a coset.
const LEAST_COSET_BITS: u32 = 10;
/// Repeats of a body that are planned together.
pub const UNROLLED_REPEATS: u64 = 4;
/// Rotations in a body up to which that is done.
pub const UNROLLED_LENGTH: usize = 4096;
/// Operations in a pass, at most.
const LONGEST_PASS: usize = 4096;
/// How many operations a pass, or a run over tiles, may skip before it is closed.
const LOOK_AHEAD: usize = 192;

/// Qubits of the smallest state that passes work on; smaller ones are extended by zeros.
pub const fn least_qubits<T: Real>() -> u32 {
    T::LANE_BITS + TILE_BITS
}

/// One traversal of the state vector.
#[derive(Clone, Debug)]
pub struct Pass<T: Real> {
    /// The space whose cosets it works on.
    pub space: Space,
    /// Where a coset lies in the state.
    pub layout: Layout,
    /// What happens to a coset.
    pub work: Work<T>,
    /// Rotations that it carries out.
    pub rotations: usize,
    /// What the state after this pass still has to be multiplied by: later passes do it on their way.
    pub owed: Complex64,
    /// The same in short, where the list is so short that each pass of it is one rotation.
    pub single: Option<Single<T>>,
}

/// Plans a list on `qubits` qubits. Every rotation of the list ends up in exactly one pass.
///
/// # Errors
/// A stop on request.
pub fn plan<T: Real>(qubits: u32, list: &[Rotation], control: &Control) -> Result<Vec<Pass<T>>> {
    let list = &joined(list)[..];
    let few = list.len() <= if qubits <= WHOLE_BITS { 1 } else { FEW };
    let singles: Option<Vec<_>> = if few { list.iter().map(Single::new).collect() } else { None };
    let (limit, parts) = if qubits <= WHOLE_BITS {
        (qubits, divide::<T>(list, qubits, control)?)
    } else if singles.is_some() {
        let limit = COSET_BITS[0] + T::LANE_BITS;
        let one = |operation| divide::<T>(std::slice::from_ref(operation), limit, control);
        (limit, list.iter().map(one).collect::<Result<Vec<_>>>()?.into_iter().flatten().collect())
    } else {
        let limits = COSET_BITS.map(|bits| bits + T::LANE_BITS);
        let [small, large] = limits.map(|limit| divide::<T>(list, limit, control));
        let (small, large) = (small?, large?);
        if small.len() <= large.len() { (limits[0], small) } else { (limits[1], large) }
    };
    let mut owed = ONE;
    let pass = |Part { members, span }: Part| Pass::new(span, limit, &members, &mut owed);
    let mut passes: Vec<Pass<T>> = parts.into_iter().map(pass).collect();
    settle(&mut passes, owed);
    passes.iter_mut().zip(singles.into_iter().flatten()).for_each(|(pass, single)| pass.single = Some(single));
    Ok(passes)
}

/// What one pass takes, and the span that it needs.
struct Part<'a> {
    members: Vec<&'a Operation>,
    span: Span,
}

/// Greedy: part after part, each the one that takes more rotations of two, with the lowest qubits or with a gathered span.
fn divide<'a, T: Real>(list: &'a [Operation], limit: u32, control: &Control) -> Result<Vec<Part<'a>>> {
    let run_bits = (T::LANE_BITS + 2).min(limit);
    let mut parts = vec![];
    let mut taken = vec![false; list.len()];
    for first in 0..list.len() {
        if taken[first] {
            continue;
        }
        control.go_on()?;
        let weight = |places: &[usize]| places.iter().map(|&place| list[place].count()).sum::<usize>();
        let low = gather(list, &taken, first, Span::of_low_bits(limit), limit);
        let spread = gather(list, &taken, first, Span::of_low_bits(run_bits), limit);
        let (places, span) = if weight(&low.0) >= weight(&spread.0) { low } else { spread };
        places.iter().for_each(|&place| taken[place] = true);
        parts.push(Part { members: places.iter().map(|&place| &list[place]).collect(), span });
    }
    Ok(parts)
}

/// Lets the last diagonal operation, or the last pass, apply what the passes left to do.
fn settle<T: Real>(passes: &mut [Pass<T>], owed: Complex64) {
    if owed == ONE {
        return;
    }
    match passes.iter_mut().rposition(|pass| pass.work.absorb(owed)) {
        Some(place) => passes[place..].iter_mut().for_each(|pass| pass.owed /= owed),
        None => {
            let last = passes.last_mut().expect("some pass left the factor");
            last.work.scale(owed);
            last.owed = ONE;
        }
    }
}

/// Places, from `first` on, of operations that fit the span and commute with all that were skipped before them; and the
/// span that they need.
fn gather(list: &[Operation], taken: &[bool], first: usize, mut span: Span, limit: u32) -> (Vec<usize>, Span) {
    let mut members = Vec::new();
    let mut skipped: Vec<&Operation> = Vec::new();
    for place in (first..list.len()).filter(|&place| !taken[place]) {
        let operation = &list[place];
        if skipped.iter().all(|s| s.commutes_with_all_of(operation)) && span.admit(operation.x(), limit) {
            members.push(place);
        } else {
            skipped.push(operation);
        }
        if skipped.len() == LOOK_AHEAD || members.len() == LONGEST_PASS {
            break;
        }
    }
    (members, span)
}

impl<T: Real> Pass<T> {
    fn new(span: Span, limit: u32, members: &[&Operation], owed: &mut Complex64) -> Self {
        let dimension = span.dimension().max(LEAST_COSET_BITS.min(limit));
        let space = Space::new(span.filled(dimension));
        let layout = Layout::sequence::<T>(&space);
        let work = tiles::prepare(&space, members, owed);
        let rotations = members.iter().map(|operation| operation.count()).sum();
        Self { space, layout, work, rotations, owed: *owed, single: None }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::pauli::PauliString;

    fn rotation(x: u128, z: u128) -> Rotation {
        Rotation { string: PauliString { x, z }, angle: 0.1 }
    }

    fn members(list: &[Rotation], qubits: u32) -> Vec<usize> {
        plan::<f64>(qubits, list, &Control::default()).unwrap().iter().map(|pass| pass.rotations).collect()
    }

    #[test]
    fn a_small_state_takes_one_pass() {
        let list = [rotation(0, 0b11), rotation(1 << 12, 0), rotation(0, 0b110), rotation(0, 3 << 12)];
        assert_eq!(members(&list, 14), [4]);
    }

    #[test]
    fn a_chain_of_bonds_takes_as_many_passes_as_its_span_needs() {
        // The low twelve qubits hold eleven bonds; other seven fit five forced bits and seven more, as eight need the larger coset.
        let list: Vec<_> = (0..19).map(|q| rotation(3 << q, 0)).collect();
        assert_eq!(members(&list[..18], 19), [11, 7]);
        assert_eq!(members(&list, 20), [12, 7]);
    }

    #[test]
    fn two_bonds_share_a_pass_and_two_lone_strings_do_not() {
        let bond = |q: u128| [rotation(3 << q, 0), rotation(3 << q, 3 << q)];
        assert_eq!(members(&[bond(0), bond(3)].concat(), 17), [4]);
        assert_eq!(members(&[rotation(1, 0), rotation(2, 0)], 17), [1, 1]);
    }

    #[test]
    fn every_rotation_is_in_one_pass() {
        let list: Vec<_> = (0..300u128).map(|i| rotation(i * 7919 % (1 << 18), i * 104729 % (1 << 18))).collect();
        assert_eq!(members(&list, 18).iter().sum::<usize>(), 300);
    }
}
