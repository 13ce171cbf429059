//! Images of a state under an [`Action`], block by block, and what is made of them.

use num_complex::{Complex, Complex64};

use super::Isa;
use super::blocks::{Accumulate, Gain, Weigh};
use super::lanes::{Factor, GROUP_BITS, LANES, LaneString, Real};
use super::reduce::Dot;
use super::shared::Shared;
use crate::action::{Action, BLOCK_BITS, PART};
use crate::error::Result;
use crate::sums::{collect_blocks, pairwise};
use crate::team::{Control, Member, Run, run, workers_for};

/// Groups in a block of a state of `groups` groups.
fn block_groups(groups: usize) -> usize {
    groups.min(1 << (BLOCK_BITS - GROUP_BITS))
}

/// Writes block `block` of the image of `state` into `out`; `part` is room of the same size.
///
/// # Safety
/// Nobody writes to `state` meanwhile.
unsafe fn image<T: Real>(
    action: &Action<T>,
    isa: Isa,
    state: &Shared<T>,
    block: usize,
    out: &mut [[T; LANES]],
    part: &mut [[T; LANES]],
) {
    let groups = out.len();
    let zero = [T::default(); LANES];
    let mut waiting = 0;
    match &action.diagonal {
        None => out.fill(zero),
        Some(diagonal) => {
            // SAFETY: blocks below the number of blocks are in bounds, and nobody writes, by this function's contract.
            let own = unsafe { state.groups_ref(block * groups, groups) };
            isa.run(Weigh { out, source: own, weights: &diagonal.table });
        }
    }
    part.fill(zero);
    for source in &action.sources {
        let from = block ^ source.x;
        // SAFETY: as above.
        let amplitudes = unsafe { state.groups_ref(from * groups, groups) };
        for item in &source.items {
            isa.run(Accumulate { out: part, source: amplitudes, string: &item.joined(from) });
            waiting += 1;
            if waiting == PART {
                isa.run(Gain { out, part });
                part.fill(zero);
                waiting = 0;
            }
        }
    }
    if waiting > 0 {
        isa.run(Gain { out, part });
    }
}

/// Calls `take(block, image)` for this worker's share of blocks.
fn each_block<T: Real>(
    action: &Action<T>,
    isa: Isa,
    member: &Member,
    state: &Shared<T>,
    mut take: impl FnMut(usize, &mut [[T; LANES]]),
) -> Result<()> {
    let groups = block_groups(state.groups());
    let mut out = vec![[T::default(); LANES]; groups];
    let mut part = out.clone();
    member.each_piece(state.groups() / groups, 8, |blocks| {
        for block in blocks {
            // SAFETY: the callers of this function write to other arrays than `state` while it runs.
            unsafe { image(action, isa, state, block, &mut out, &mut part) };
            take(block, &mut out);
        }
    })
}

/// out ← action |state>, both of at least one group and of the right length.
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
    assert!(state.len() == 1 << action.qubits.max(GROUP_BITS) && out.len() == state.len());
    let isa = Isa::chosen()?;
    let workers = workers_for(threads, state.len());
    let (state, out) = (Shared::new(state), Shared::new(out));
    run(workers, control, |member| {
        each_block(action, isa, member, &state, |block, image| {
            // SAFETY: each block belongs to one worker, and `out` is not `state`.
            unsafe { out.groups_mut(block * image.len(), image.len()) }.copy_from_slice(image);
        })?;
        member.pass_done()
    })
}

/// `<state| action |state>` of a state of at least one group and of the right length.
///
/// # Errors
/// A stop on request.
pub fn expectation<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<f64> {
    assert!(state.len() == 1 << action.qubits.max(GROUP_BITS));
    let isa = Isa::chosen()?;
    let amplitudes = state.len();
    let shared = Shared::new(state);
    let groups = block_groups(shared.groups());
    let partial = collect_blocks(shared.groups() / groups, amplitudes, threads, control, |block| {
        let mut out = vec![[T::default(); LANES]; groups];
        let mut part = out.clone();
        // SAFETY: the state is only read here, by every worker.
        let own = unsafe {
            image(action, isa, &shared, block, &mut out, &mut part);
            shared.groups_ref(block * groups, groups)
        };
        isa.run(Dot { left: own, right: &out }).0
    })?;
    Ok(pairwise(&partial))
}

/// The recurrence behind [`crate::apply::chebyshev_sums`], on states of at least one group and of the right length.
///
/// # Errors
/// A stop on request.
pub fn chebyshev(
    action: &Action<f64>,
    current: &mut [Complex64],
    previous: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    let lengths = [previous.len()].into_iter().chain(sums.iter().map(|sum| sum.len()));
    assert!(current.len() == 1 << action.qubits.max(GROUP_BITS) && lengths.into_iter().all(|l| l == current.len()));
    let isa = Isa::chosen()?;
    let terms = coefficients[0].len();
    let workers = workers_for(threads, current.len());
    control.expect(control.progress().0 + terms as u64);
    let buffers = [Shared::new(current), Shared::new(previous)];
    let sums: Vec<Shared<f64>> = sums.iter_mut().map(|sum| Shared::new(sum)).collect();
    run(workers, control, |member| {
        // Term 0: the sums start as a_0 |start>.
        member.each_piece(buffers[0].groups(), 1 << 12, |range| {
            // SAFETY: each range of groups belongs to one worker; the start is only read.
            let start = unsafe { buffers[0].groups_ref(range.start, range.len()) };
            for (sum, list) in sums.iter().zip(coefficients) {
                // SAFETY: as above, and the sums are distinct arrays.
                let sum = unsafe { sum.groups_mut(range.start, range.len()) };
                for (sum, start) in sum.iter_mut().zip(start) {
                    *sum = start.map(|value| list[0] * value);
                }
            }
        })?;
        member.pass_done()?;
        for term in 1..terms {
            let (read, write) = (&buffers[(term + 1) & 1], &buffers[term & 1]);
            let turned: Vec<LaneString<f64>> = coefficients
                .iter()
                .map(|list| LaneString::new(0, 0, Factor::Real(list[term]).times_i_power((3 * term as u32) & 3)))
                .collect();
            each_block(action, isa, member, read, |block, image| {
                let place = block * image.len();
                // SAFETY: `write` is not `read`, and each block belongs to one worker.
                let next = unsafe { write.groups_mut(place, image.len()) };
                for (next, image) in next.iter_mut().zip(image.iter()) {
                    *next = if term == 1 {
                        image.map(|value| 0.5 * value)
                    } else {
                        std::array::from_fn(|l| image[l] - next[l])
                    };
                }
                for (sum, string) in sums.iter().zip(&turned) {
                    // SAFETY: as above; the sums are distinct arrays.
                    let out = unsafe { sum.groups_mut(place, image.len()) };
                    isa.run(Accumulate { out, source: next, string });
                }
            })?;
            member.pass_done()?;
        }
        Ok(())
    })
}
