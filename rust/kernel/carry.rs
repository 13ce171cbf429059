//! Carries the passes of [`crate::passes`] out: each worker its share of cosets, in place.
//!
//! Between the first and the last pass of a run the state is kept as vectors of real and of imaginary parts in turn; the
//! first tiles of the first pass split what they load, the last tiles of the last pass interleave what they store.

use super::Isa;
use super::VectorWork;
use super::lanes::Real;
use super::shared::Shared;
use super::tile::{Ahead, Place, Tiles};
use super::vector::Vector;
use crate::error::{Error, Result};
use crate::passes::Pass;
use crate::passes::diagonal::CosetFactors;
use crate::team::Member;

/// Bytes of a state above which the next coset is fetched ahead: below, everything stays in cache anyway.
const FETCH_FROM: usize = 1 << 23;
/// Amplitudes that a worker handles between two looks at the flags, at least.
const PIECE: usize = 1 << 15;

/// One worker's hands on a state.
pub struct Carrier<'a, T: Real> {
    isa: Isa,
    member: &'a Member<'a>,
    state: &'a Shared<'a, T>,
    coset: Vec<T::Line>,
    factors: Vec<CosetFactors<T>>,
    entries: Vec<usize>,
    interleaved: bool,
}

impl<'a, T: Real> Carrier<'a, T> {
    /// Hands on `state` for one member of a team, all of whose members carry out the same passes in the same order.
    pub fn new(isa: Isa, member: &'a Member<'a>, state: &'a Shared<'a, T>) -> Self {
        Self { isa, member, state, coset: vec![], factors: vec![], entries: vec![], interleaved: true }
    }

    /// Carries out this member's share of a pass and waits for the others. `last` says that no other pass follows.
    ///
    /// # Errors
    /// As [`Member::pass_done`] and [`Member::each_piece`]. After a stop the state is interleaved.
    pub fn pass(&mut self, pass: &Pass<T>, last: bool) -> Result<()> {
        self.carry_out(pass, last)?;
        self.interleaved = last;
        let done = self.member.pass_done();
        if matches!(done, Err(Error::Cancelled { .. })) && !self.interleaved {
            self.restore()?;
        }
        done
    }

    /// Interleaves this member's share of the state.
    fn restore(&mut self) -> Result<()> {
        self.interleaved = true;
        let reals = 2usize << T::LANE_BITS;
        self.member.each_piece(self.state.reals() / reals, PIECE >> T::LANE_BITS, |vectors| {
            // SAFETY: pieces are disjoint and in bounds; `Interleave` asks for no more than that.
            unsafe {
                let start = self.state.at(vectors.start * reals);
                self.isa.run_vectors(Interleave { start, vectors: vectors.len() });
            }
        })
    }

    fn carry_out(&mut self, pass: &Pass<T>, last: bool) -> Result<()> {
        let size = 1usize << pass.space.dimension();
        let amplitudes = self.state.reals() / 2;
        if !pass.offsets.is_empty() {
            self.coset.resize(size << 1 >> T::LANE_BITS, T::Line::default());
        }
        self.factors.resize_with(self.factors.len().max(pass.work.diagonals.len()), CosetFactors::default);
        let fetching = amplitudes * 2 * size_of::<T>() >= FETCH_FROM;
        let member = self.member;
        member.each_piece(amplitudes / size, (PIECE / size).max(1), |numbers| {
            let mut next = pass.space.representative(numbers.start);
            for number in numbers.clone() {
                let rep = next;
                next = pass.space.representative((number + 1).min(numbers.end - 1));
                // SAFETY: each coset number belongs to one piece of one worker, and cosets are disjoint.
                unsafe { self.coset(pass, rep, fetching.then_some(next), last) };
            }
        })
    }

    /// Applies a pass to the coset of `rep`, and fetches that of `next`.
    ///
    /// # Safety
    /// Nobody else uses the amplitudes of the coset meanwhile.
    unsafe fn coset(&mut self, pass: &Pass<T>, rep: usize, next: Option<usize>, last: bool) {
        let work = &pass.work;
        for (diagonal, room) in work.diagonals.iter().zip(&mut self.factors) {
            diagonal.prepare(rep, room);
        }
        let contiguous = pass.offsets.is_empty();
        // SAFETY: representatives are indices of the state.
        let outside = |rep: usize| unsafe {
            if contiguous {
                Place { start: self.state.at(2 * rep), scattered: None, interleaved: false }
            } else {
                let scattered = Some((rep, &pass.offsets[..], pass.run_bits));
                Place { start: self.state.at(0), scattered, interleaved: false }
            }
        };
        let own = outside(rep);
        let inside = if contiguous {
            own
        } else {
            Place { start: self.coset.as_mut_ptr().cast(), scattered: None, interleaved: false }
        };
        let (first_from, last_to) =
            (Place { interleaved: self.interleaved, ..own }, Place { interleaved: last, ..own });
        let runs = work.runs();
        let mut before = 0;
        for stage in &work.stages {
            let vectors = 1usize << (pass.space.dimension() - T::LANE_BITS);
            for part in (0..vectors).step_by(1 << stage.part_bits) {
                for (place, run) in stage.runs.iter().enumerate() {
                    let number = before + place;
                    let ahead = next.map(|next| Ahead { next: outside(next), first: number, step: runs });
                    let tiles = Tiles {
                        run,
                        part,
                        rep,
                        from: if number == 0 { first_from } else { inside },
                        to: if number + 1 == runs { last_to } else { inside },
                        diagonals: &work.diagonals,
                        factors: &self.factors,
                        ahead,
                        entries: &mut self.entries,
                    };
                    // SAFETY: the places hold one coset each, nobody else uses them by this function's contract, and the
                    // operations were prepared for this space.
                    unsafe { self.isa.run_vectors(tiles) };
                }
            }
            before += stage.runs.len();
        }
    }
}

/// Turns pairs of vectors into interleaved amplitudes, in place.
struct Interleave<T> {
    start: *mut T,
    vectors: usize,
}

impl<T: Real> VectorWork<T> for Interleave<T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: `start` points to `vectors` pairs of vectors that nobody else uses.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let lanes = 1usize << T::LANE_BITS;
        for vector in 0..self.vectors {
            // SAFETY: by contract.
            unsafe {
                let address = self.start.add(2 * lanes * vector);
                let (first, second) = V::interleave(V::load(address), V::load(address.add(lanes)));
                first.store(address);
                second.store(address.add(lanes));
            }
        }
    }
}
