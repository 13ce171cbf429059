//! What an operator does to a state: H|ψ>, expectations, and the Chebyshev recurrence.
//!
//! The output is made block by block in first-level cache. Terms are sorted by the high bits of their x mask: all of one
//! sort read the same source block. Inside, terms join as far as one pass over the block can carry them:
//!
//! - terms with the same low masks share one coefficient for the block, the sum of theirs with the signs that the high
//!   bits give;
//! - strings with the same low x mask whose signs depend on one parity of the block index at most (XX and YY on a bond) add
//!   up to one string with weights for either parity;
//! - diagonal strings on low bits alone add up to a table, made once.
//!
//! So one traversal of the output serves all terms, and the recurrence T_{k+1} = 2 H' T_k - T_{k-1} with its accumulations
//! is folded into the same traversal. Joined terms are summed in groups of eight and the groups then added, so that a term
//! passes through at most 8 + (joined terms / 8) additions; [`Action::rounding`] counts them for the certificate.

use num_complex::{Complex, Complex64};

use crate::error::{Error, Result};
use crate::evolve::require_length;
use crate::kernel::Isa;
use crate::kernel::blocks::{Accumulate, Gain, Weigh};
use crate::kernel::lanes::{Factor, GROUP_BITS, LANES, LaneString, Real};
use crate::kernel::reduce::Dot;
use crate::kernel::shared::Shared;
use crate::sums::{collect_blocks, pairwise};
use crate::team::{Control, Member, Run, run, workers_for};
use crate::terms::Terms;

/// Low bits of a block: the sum, its part and the source fit in first-level cache together.
const BLOCK_BITS: u32 = 9;
/// Terms added up before they join the sum.
const PART: usize = 8;

/// Strings with the same low masks.
struct Share<T> {
    /// Their low part with factor 1 or i.
    unit: LaneString<T>,
    /// High z mask and signed coefficient of each.
    terms: Vec<(usize, f64)>,
}

impl<T> Share<T> {
    /// Σ ± coefficient, the signs being those of the high bits of the source block.
    fn coefficient(&self, source: usize) -> f64 {
        let signed = |(z, c): &(usize, f64)| if (source & z).count_ones() & 1 == 1 { -c } else { *c };
        self.terms.iter().map(signed).sum()
    }
}

/// Strings that one pass over a block carries: they move lanes and groups alike, and at most one parity of the group index
/// other than none gives their signs.
struct Item<T> {
    shares: Vec<Share<T>>,
}

impl<T: Real> Item<T> {
    fn admits(&self, unit: &LaneString<T>) -> bool {
        let first = &self.shares[0].unit;
        let parities = self.shares.iter().map(|share| share.unit.z).chain([unit.z]).filter(|&z| z != 0);
        let mut parities = parities.collect::<Vec<_>>();
        parities.dedup();
        first.m == unit.m && first.x == unit.x && parities.len() <= 1
    }

    /// The sum of the shares as one string, for a source block.
    fn joined(&self, source: usize) -> LaneString<T> {
        let scaled = |share: &Share<T>| share.unit.scaled(T::from_f64(share.coefficient(source)));
        let mut shares = self.shares.iter();
        let first = shares.next().map(scaled);
        shares.map(scaled).fold(first, |sum, next| sum.map(|sum| sum.plus(&next))).unwrap_or_else(LaneString::nothing)
    }
}

/// Items that read the same source block.
struct Source<T> {
    x: usize,
    items: Vec<Item<T>>,
}

/// An operator `scale · H + shift`, ready to be applied.
pub struct Action<T> {
    qubits: u32,
    sources: Vec<Source<T>>,
    /// Diagonal strings on low bits alone: how many, Σ |coefficient|, and the sum for each lane.
    diagonal: Option<Diagonal<T>>,
}

struct Diagonal<T> {
    strings: usize,
    size: f64,
    table: Vec<[T; LANES]>,
}

impl<T: Real> Action<T> {
    /// Prepares `scale · terms + shift`.
    pub fn new(terms: &Terms, scale: f64, shift: f64) -> Self {
        let mut action = Self { qubits: terms.qubits(), sources: vec![], diagonal: None };
        let low = (1u64 << BLOCK_BITS) - 1;
        let masks = terms.strings().iter().map(|s| (s.x as u64, s.z as u64, s.y_count()));
        let scaled = masks.zip(terms.coefficients().iter().map(|coefficient| scale * coefficient));
        let all = scaled.chain((shift != 0.0).then_some(((0, 0, 0), shift)));
        let (diagonal, others): (Vec<_>, Vec<_>) = all.partition(|((x, z, _), _)| *x == 0 && z & !low == 0);
        for ((x, z, y_count), coefficient) in others {
            action.add(x, z, y_count, coefficient);
        }
        if !diagonal.is_empty() {
            action.diagonal =
                Some(action.tabulated(&diagonal.iter().map(|((_, z, _), c)| (*z, *c)).collect::<Vec<_>>()));
        }
        action
    }

    fn add(&mut self, x: u64, z: u64, y_count: u32, coefficient: f64) {
        let low = (1u64 << BLOCK_BITS) - 1;
        let (signed, unit) = match Factor::Real(coefficient).times_i_power(y_count) {
            Factor::Real(value) => (value, Factor::Real(1.0)),
            Factor::Imaginary(value) => (value, Factor::Imaginary(1.0)),
        };
        let unit = LaneString::new(x & low, z & low, unit);
        let source = (x >> BLOCK_BITS) as usize;
        let place = self.sources.iter().position(|s| s.x == source).unwrap_or_else(|| {
            self.sources.push(Source { x: source, items: vec![] });
            self.sources.len() - 1
        });
        let term = ((z >> BLOCK_BITS) as usize, signed);
        let items = &mut self.sources[place].items;
        match items.iter_mut().find(|item| item.admits(&unit)) {
            None => items.push(Item { shares: vec![Share { unit, terms: vec![term] }] }),
            Some(item) => match item.shares.iter_mut().find(|share| share.unit == unit) {
                Some(share) => share.terms.push(term),
                None => item.shares.push(Share { unit, terms: vec![term] }),
            },
        }
    }

    fn tabulated(&self, strings: &[(u64, f64)]) -> Diagonal<T> {
        let groups = 1usize << (self.qubits.clamp(GROUP_BITS, BLOCK_BITS) - GROUP_BITS);
        let value = |index: u64| -> f64 {
            strings.iter().map(|(z, c)| if (index & z).count_ones() & 1 == 1 { -c } else { *c }).sum()
        };
        let lanes = |q: usize| std::array::from_fn(|l| T::from_f64(value((q * LANES / 2 + l / 2) as u64)));
        Diagonal {
            strings: strings.len(),
            size: strings.iter().map(|(_, c)| c.abs()).sum(),
            table: (0..groups).map(lanes).collect(),
        }
    }

    /// Bound on the 2-norm of the rounding error of one application to a unit vector, in units of the roundoff.
    ///
    /// Each term is rounded once when scaled, once for each sum of coefficients or weights it enters, once when multiplied,
    /// and once for each addition of amplitudes that it passes through; the error is at most the sum of |coefficient| times
    /// that number, since a string only permutes amplitudes and changes their phase by a power of i.
    pub fn rounding(&self) -> f64 {
        let items: Vec<&Item<T>> = self.sources.iter().flat_map(|source| &source.items).collect();
        let parts = items.len().div_ceil(PART) + 1;
        let weigh = |(place, item): (usize, &&Item<T>)| {
            let additions = (PART - place % PART) + (parts - place / PART);
            let one = |share: &Share<T>| {
                let size: f64 = share.terms.iter().map(|(_, coefficient)| coefficient.abs()).sum();
                size * (2 + share.terms.len() + item.shares.len() + additions) as f64
            };
            item.shares.iter().map(one).sum::<f64>()
        };
        let diagonal = self.diagonal.as_ref().map_or(0.0, |d| d.size * (2 + d.strings + parts) as f64);
        items.iter().enumerate().map(weigh).sum::<f64>() + diagonal
    }

    /// Groups in a block of a state of `groups` groups.
    fn block_groups(groups: usize) -> usize {
        groups.min(1 << (BLOCK_BITS - GROUP_BITS))
    }

    /// Writes block `block` of the image of `state` into `out`; `part` is room of the same size.
    ///
    /// # Safety
    /// Nobody writes to `state` meanwhile.
    unsafe fn block(&self, isa: Isa, state: &Shared<T>, block: usize, out: &mut [[T; LANES]], part: &mut [[T; LANES]]) {
        let groups = out.len();
        let zero = [T::default(); LANES];
        let mut waiting = 0;
        match &self.diagonal {
            None => out.fill(zero),
            Some(diagonal) => {
                // SAFETY: blocks below the number of blocks are in bounds, and nobody writes, by this function's contract.
                let own = unsafe { state.groups_ref(block * groups, groups) };
                isa.run(Weigh { out, source: own, weights: &diagonal.table });
            }
        }
        part.fill(zero);
        for source in &self.sources {
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
}

/// A state of at least one group: shorter ones are extended by zeros.
fn extended<T: Real>(state: &[Complex<T>]) -> Vec<Complex<T>> {
    let mut longer = state.to_vec();
    longer.resize(state.len().max(1 << GROUP_BITS), Complex::new(T::default(), T::default()));
    longer
}

fn is_short<T>(state: &[Complex<T>]) -> bool {
    state.len() < 1 << GROUP_BITS
}

/// out ← action |state>.
///
/// # Errors
/// Lengths that do not fit; a stop on request, after which `out` is unfinished.
pub fn apply<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    out: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    require_length(state.len(), action.qubits)?;
    require_length(out.len(), action.qubits)?;
    if is_short(state) {
        let (mut longer, mut longer_out) = (extended(state), extended(out));
        let run = apply_long(action, &mut longer, &mut longer_out, threads, control)?;
        out.copy_from_slice(&longer_out[..state.len()]);
        return Ok(run);
    }
    apply_long(action, state, out, threads, control)
}

fn apply_long<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    out: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
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

/// Calls `take(block, image)` for this worker's share of blocks.
fn each_block<T: Real>(
    action: &Action<T>,
    isa: Isa,
    member: &Member,
    state: &Shared<T>,
    mut take: impl FnMut(usize, &mut [[T; LANES]]),
) -> Result<()> {
    let groups = Action::<T>::block_groups(state.groups());
    let mut image = vec![[T::default(); LANES]; groups];
    let mut part = image.clone();
    member.each_piece(state.groups() / groups, 8, |blocks| {
        for block in blocks {
            // SAFETY: the callers of this function write to other arrays than `state` while it runs.
            unsafe { action.block(isa, state, block, &mut image, &mut part) };
            take(block, &mut image);
        }
    })
}

/// `<state| action |state>`.
///
/// # Errors
/// A length that does not fit.
pub fn expectation<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<f64> {
    require_length(state.len(), action.qubits)?;
    let mut longer;
    let state = if is_short(state) {
        longer = extended(state);
        &mut longer[..]
    } else {
        state
    };
    let isa = Isa::chosen()?;
    let amplitudes = state.len();
    let shared = Shared::new(state);
    let groups = Action::<T>::block_groups(shared.groups());
    let partial = collect_blocks(shared.groups() / groups, amplitudes, threads, control, |block| {
        let mut image = vec![[T::default(); LANES]; groups];
        let mut part = image.clone();
        // SAFETY: the state is only read here, by every worker.
        let own = unsafe {
            action.block(isa, &shared, block, &mut image, &mut part);
            shared.groups_ref(block * groups, groups)
        };
        isa.run(Dot { left: own, right: &image }).0
    })?;
    Ok(pairwise(&partial))
}

/// Sums Σ_k a_k (-i)^k T_k(H') |start> for several lists of coefficients at once, where `action` is 2 H'.
///
/// `current` holds the start and is used up, `previous` is room; `sums[i]` receives the sum with `coefficients[i]`. All
/// lists have the same length, at least 1.
///
/// # Errors
/// Lengths that do not fit; a stop on request.
pub fn chebyshev_sums(
    action: &Action<f64>,
    current: &mut [Complex64],
    previous: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    for length in [current.len(), previous.len()].into_iter().chain(sums.iter().map(|s| s.len())) {
        require_length(length, action.qubits)?;
    }
    let terms = coefficients.first().map_or(0, Vec::len);
    if terms == 0 || coefficients.len() != sums.len() || coefficients.iter().any(|list| list.len() != terms) {
        return Err(Error::Internal { message: "lists of Chebyshev coefficients of unequal lengths".into() });
    }
    if is_short(current) {
        let (mut current, mut previous) = (extended(current), extended(previous));
        let mut longer: Vec<Vec<Complex64>> = sums.iter().map(|sum| extended(sum)).collect();
        let mut views: Vec<&mut [Complex64]> = longer.iter_mut().map(Vec::as_mut_slice).collect();
        let run = recur(action, &mut current, &mut previous, &mut views, coefficients, threads, control)?;
        sums.iter_mut().zip(&longer).for_each(|(sum, longer)| sum.copy_from_slice(&longer[..sum.len()]));
        return Ok(run);
    }
    recur(action, current, previous, sums, coefficients, threads, control)
}

fn recur(
    action: &Action<f64>,
    current: &mut [Complex64],
    previous: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_short_state_is_extended_and_cut_back() {
        let state = [Complex64::new(1.0, 0.0), Complex64::new(0.0, 2.0)];
        assert_eq!(extended(&state).len(), 4);
        assert!(is_short(&state));
    }
}
