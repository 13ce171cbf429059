//! Carries the passes of [`crate::passes`] out: each worker its share of cosets, in place.
//!
//! Between the first and the last pass of a run the state is kept as vectors of real and of imaginary parts in turn; the
//! first tiles of the first pass split what they load, the last tiles of the last pass interleave what they store.

use num_complex::Complex64;

use super::Isa;
use super::copies::Copy;
use super::lanes::Real;
use super::shared::Shared;
use super::single::Turning;
use super::tile::{Ahead, Home, Place, Tiles};
use crate::error::{Error, Result};
use crate::passes::Pass;
use crate::passes::diagonal::CosetFactors;
use crate::passes::single::{GROUP, Single};
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
        match &pass.single {
            Some(single) if self.interleaved => self.turn(single)?,
            _ => {
                self.carry_out(pass, last)?;
                self.interleaved = last;
            }
        }
        let done = self.member.pass_done();
        if matches!(done, Err(Error::Cancelled { .. })) && !self.interleaved {
            self.restore(pass.owed)?;
        }
        done
    }

    /// Interleaves this member's share of the state, and multiplies it by what later passes would have done.
    fn restore(&mut self, owed: Complex64) -> Result<()> {
        let factor = (T::from_f64(owed.re), T::from_f64(owed.im));
        self.interleaved = true;
        let reals = 2usize << T::LANE_BITS;
        self.member.each_piece(self.state.reals() / reals, PIECE >> T::LANE_BITS, |vectors| {
            // SAFETY: pieces are disjoint and in bounds; a vector is read before it is written.
            unsafe {
                let start = self.state.at(vectors.start * reals);
                let from = Place { start, origin: 0, layout: None, interleaved: false };
                let to = Place { interleaved: true, ..from };
                self.isa.run_vectors(Copy { from, to, vectors: vectors.len(), factor: Some(factor) });
            }
        })
    }

    /// Carries out one rotation on an interleaved state.
    fn turn(&self, single: &Single<T>) -> Result<()> {
        let reals = self.state.reals();
        let fetching = reals * size_of::<T>() >= FETCH_FROM;
        self.member.each_piece(single.units(reals), PIECE / (GROUP << T::LANE_BITS), |units| {
            // SAFETY: each unit belongs to one piece of one worker, and units are disjoint.
            unsafe {
                let (state, first, count) = (self.state.at(0), units.start, units.len());
                self.isa.run_vectors(Turning { single, state, first, count, fetching });
            }
        })
    }

    fn carry_out(&mut self, pass: &Pass<T>, last: bool) -> Result<()> {
        let size = 1usize << pass.space.dimension();
        let amplitudes = self.state.reals() / 2;
        if !pass.space.is_contiguous() {
            self.coset.resize(size << 1 >> T::LANE_BITS, T::Line::default());
        }
        self.factors.resize_with(self.factors.len().max(pass.work.diagonals.len()), CosetFactors::default);
        let fetching = amplitudes * 2 * size_of::<T>() >= FETCH_FROM;
        let member = self.member;
        let cosets = amplitudes / size;
        member.each_piece(cosets, (PIECE / size).max(1), |numbers| {
            let mut next = pass.space.representative(numbers.start);
            for number in numbers {
                let rep = next;
                next = pass.space.representative((number + 1).min(cosets - 1));
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
        // SAFETY: the state has a first real.
        let start = unsafe { self.state.at(0) };
        let state = Home { start, origin: 2 * rep, outside: true, interleaved: false };
        let inside = if pass.space.is_contiguous() {
            state
        } else {
            Home { start: self.coset.as_mut_ptr().cast(), origin: 0, outside: false, interleaved: false }
        };
        let first_from = Home { interleaved: self.interleaved, ..state };
        let last_to = Home { interleaved: last, ..state };
        let runs = work.runs();
        let mut before = 0;
        for stage in &work.stages {
            for part in &stage.parts {
                for (place, run) in stage.runs.iter().enumerate() {
                    let first = before + place;
                    let ahead =
                        next.map(|next| Ahead { start, origin: 2 * next, layout: &pass.layout, first, step: runs });
                    let tiles = Tiles {
                        run,
                        part,
                        rep,
                        from: if first == 0 { first_from } else { inside },
                        to: if first + 1 == runs { last_to } else { inside },
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
