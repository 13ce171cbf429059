//! Carries an [`Action`] out: each worker its share of cosets, pass by pass.

use std::sync::atomic::{AtomicU64, Ordering};

use num_complex::Complex;

use super::Isa;
use super::copies::{Copy, Refill};
use super::image::{Coming, Ending, Old, Room, coset_image};
use super::lanes::Real;
use super::shared::Shared;
use super::tile::{Ahead, Place};
use crate::action::{Action, ActionPass};
use crate::error::Result;
use crate::passes::least_qubits;
use crate::sums::pairwise;
use crate::team::{Control, Member, Run, run, workers_for};

/// Bytes of a state above which the next coset is fetched ahead.
const FETCH_FROM: usize = 1 << 23;

/// One coset's place in a state.
pub(super) fn place<'a, T: Real>(
    pass: &'a ActionPass<T>,
    state: &Shared<T>,
    rep: usize,
    interleaved: bool,
) -> Place<'a, T> {
    // SAFETY: the state has a first real.
    let start = unsafe { state.at(0) };
    Place { start, origin: 2 * rep, layout: Some(&pass.layout), interleaved }
}

/// What to fetch of the next coset where it is worked on in place.
pub(super) fn ahead<'a, T: Real>(pass: &'a ActionPass<T>, state: &Shared<T>, next: usize) -> Ahead<'a, T> {
    // SAFETY: the state has a first real.
    let start = unsafe { state.at(0) };
    Ahead { start, origin: 2 * next, layout: &pass.layout, first: 0, step: 1 }
}

/// A worker's buffers for the coset at work and the next one.
pub(super) struct Buffers<T: Real> {
    lines: usize,
    both: [Vec<T::Line>; 2],
    /// The representative of the coset that the second buffer got while the one before was at work.
    ready: Option<usize>,
}

impl<T: Real> Buffers<T> {
    pub fn new(pass: &ActionPass<T>) -> Self {
        let lines = 2 << (pass.space.dimension() - T::LANE_BITS);
        Self { lines, both: Default::default(), ready: None }
    }

    /// The coset of `rep` as vectors of real and imaginary parts, and how the next one is to be copied meanwhile.
    ///
    /// # Safety
    /// The place holds cosets of these buffers' size that nobody writes to before the work on this coset is done; that work
    /// carries the refill out.
    pub unsafe fn take<'a>(
        &mut self,
        isa: Isa,
        place: impl Fn(usize) -> Place<'a, T>,
        rep: usize,
        next: Option<usize>,
    ) -> (*const T, Option<Refill<'a, T>>) {
        self.both.swap(0, 1);
        let [start, then] = &mut self.both;
        start.resize(self.lines, T::Line::default());
        if next.is_some() {
            then.resize(self.lines, T::Line::default());
        }
        let start: *mut T = start.as_mut_ptr().cast();
        if self.ready != Some(rep) {
            let to = Place { start, origin: 0, layout: None, interleaved: false };
            // SAFETY: by contract, and the buffer is this worker's own.
            unsafe { isa.run_vectors(Copy { from: place(rep), to, vectors: self.lines / 2, factor: None }) };
        }
        self.ready = next;
        (start, next.map(|next| Refill { from: place(next), to: then.as_mut_ptr().cast() }))
    }
}

/// Calls `work(number, rep, next rep)` for this member's cosets of a pass.
pub(super) fn each_coset<T: Real>(
    member: &Member,
    pass: &ActionPass<T>,
    state: &Shared<T>,
    mut work: impl FnMut(usize, usize, Option<usize>),
) -> Result<()> {
    let cosets = (state.reals() / 2) >> pass.space.dimension();
    let fetching = state.reals() * size_of::<T>() >= FETCH_FROM;
    member.each_piece(cosets, 4, |numbers| {
        for number in numbers {
            let next = pass.space.representative((number + 1).min(cosets - 1));
            work(number, pass.space.representative(number), fetching.then_some(next));
        }
    })
}

pub(super) fn require_size<T: Real>(action: &Action<T>, lengths: impl IntoIterator<Item = usize>) {
    let size = 1usize << action.qubits.max(least_qubits::<T>());
    assert!(lengths.into_iter().all(|length| length == size), "states are extended and checked by the caller");
}

/// out ← action |state>, of the right and least length.
///
/// # Errors
/// A stop on request, after which `out` is unfinished.
pub fn apply<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    out: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    require_size(action, [state.len(), out.len()]);
    let isa = Isa::chosen()?;
    let workers = workers_for(threads, state.len());
    let (state, out) = (Shared::new(state), Shared::new(out));
    run(workers, control, |member| {
        let mut room = Room::default();
        let last = action.passes.len() - 1;
        for (number, pass) in action.passes.iter().enumerate() {
            let mut buffers = Buffers::new(pass);
            let old = if number == 0 { Old::Dropped } else { Old::Added };
            each_coset(member, pass, &state, |_, rep, next| {
                let ending =
                    Ending::Store { out: place(pass, &out, rep, number == last), old, halved: false, gains: &[] };
                let ahead = next.map(|next| [ahead(pass, &out, next)]);
                let ahead = ahead.as_ref().map_or(&[][..], |one| &one[..]);
                // SAFETY: each coset belongs to one worker, `out` is not `state`, and the state is only read.
                unsafe {
                    let (source, refill) = buffers.take(isa, |rep| place(pass, &state, rep, true), rep, next);
                    let coming = Coming { fetched: ahead, copied: refill };
                    coset_image(isa, pass, source, rep, ending, coming, &mut room);
                }
            })?;
            member.pass_done()?;
        }
        Ok(())
    })
}

/// `<state| action |state>` for actions that were prepared together, of the right and least length. They share all
/// traversals of the state.
///
/// # Errors
/// A stop on request.
pub fn expectations<T: Real>(
    actions: &[Action<T>],
    state: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Vec<f64>> {
    let isa = Isa::chosen()?;
    let workers = workers_for(threads, state.len());
    actions.iter().for_each(|action| require_size(action, [state.len()]));
    let Some(first) = actions.first() else { return Ok(vec![]) };
    let state = Shared::new(state);
    let mut totals: Vec<Vec<f64>> = vec![vec![]; actions.len()];
    for (number, pass) in first.passes.iter().enumerate() {
        let busy = |action: &Action<T>| {
            let pass = &action.passes[number];
            !pass.addends.is_empty() || pass.diagonal.is_some()
        };
        let busy: Vec<usize> = (0..actions.len()).filter(|&which| busy(&actions[which])).collect();
        let cosets = (state.reals() / 2) >> pass.space.dimension();
        let partial: Vec<AtomicU64> = (0..busy.len() * cosets).map(|_| AtomicU64::new(0)).collect();
        run(workers, control, |member| {
            let mut room = Room::default();
            let mut buffers = Buffers::new(pass);
            each_coset(member, pass, &state, |coset, rep, next| {
                // SAFETY: the state is only read; the first image refills.
                let (source, mut refill) =
                    unsafe { buffers.take(isa, |rep| place(pass, &state, rep, true), rep, next) };
                for (slot, &which) in busy.iter().enumerate() {
                    room.dot = [0.0; 16];
                    let coming = Coming { fetched: &[], copied: refill.take() };
                    let pass = &actions[which].passes[number];
                    // SAFETY: as above; the source is this worker's buffer.
                    unsafe { coset_image(isa, pass, source, rep, Ending::Dot, coming, &mut room) };
                    partial[slot * cosets + coset].store(pairwise(&room.dot).to_bits(), Ordering::Relaxed);
                }
            })?;
            member.pass_done()
        })?;
        let values: Vec<f64> = partial.into_iter().map(|bits| f64::from_bits(bits.into_inner())).collect();
        for (&which, values) in busy.iter().zip(values.chunks(cosets)) {
            totals[which].push(pairwise(values));
        }
    }
    Ok(totals.iter().map(|values| pairwise(values)).collect())
}
