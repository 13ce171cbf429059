//! What an operator does to a state: H|ψ>, expectations, and the Chebyshev recurrence.
//!
//! The output is made block by block in first-level cache. Terms are sorted by the high bits of their x mask: all of one
//! sort read the same source block. Inside, terms with the same low masks share one coefficient for the block, the sum of
//! theirs with the signs that the high bits give. So one traversal of the output serves all terms, and the recurrence
//! T_{k+1} = 2 H' T_k - T_{k-1} with its accumulations is folded into the same traversal.
//!
//! Terms are summed in groups of eight and the groups then added, so that a term passes through at most 8 + (terms / 8)
//! additions; [`Action::rounding`] counts them for the certificate.

use num_complex::{Complex, Complex64};

use crate::error::{Error, Result};
use crate::evolve::require_length;
use crate::kernel::Isa;
use crate::kernel::lanes::{Accumulate, Dot, Factor, GROUP_BITS, LANES, LaneString, Real};
use crate::kernel::shared::Shared;
use crate::sums::{collect_blocks, pairwise};
use crate::team::{Control, Member, Run, run, workers_for};
use crate::terms::Terms;

/// Low bits of a block: the sum, its part and the source fit in first-level cache together.
const BLOCK_BITS: u32 = 9;
/// Terms added up before they join the sum.
const PART: usize = 8;

/// Terms with the same low masks, reading the same source block.
struct Item<T> {
    /// The low part of the strings with factor 1 or i.
    unit: LaneString<T>,
    /// High z mask and signed coefficient of each term.
    terms: Vec<(usize, f64)>,
}

/// Terms that read the same source block.
struct Source<T> {
    x: usize,
    items: Vec<Item<T>>,
}

/// An operator `scale · H + shift`, ready to be applied.
pub struct Action<T> {
    qubits: u32,
    sources: Vec<Source<T>>,
}

impl<T: Real> Action<T> {
    /// Prepares `scale · terms + shift`.
    pub fn new(terms: &Terms, scale: f64, shift: f64) -> Self {
        let mut action = Self { qubits: terms.qubits(), sources: vec![] };
        for (string, coefficient) in terms.strings().iter().zip(terms.coefficients()) {
            action.add(string.x as u64, string.z as u64, string.y_count(), scale * coefficient);
        }
        if shift != 0.0 {
            action.add(0, 0, 0, shift);
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
        match items.iter_mut().find(|item| item.unit == unit) {
            Some(item) => item.terms.push(term),
            None => items.push(Item { unit, terms: vec![term] }),
        }
    }

    /// Bound on the 2-norm of the rounding error of one application to a unit vector, in units of the roundoff.
    ///
    /// Each term is rounded once when scaled, once for each sum of coefficients, once when multiplied, and once for each
    /// addition that it passes through; the error is at most the sum of |coefficient| times that number, since a string
    /// only permutes amplitudes and changes their phase by a power of i.
    pub fn rounding(&self) -> f64 {
        let items: Vec<&Item<T>> = self.sources.iter().flat_map(|source| &source.items).collect();
        let parts = items.len().div_ceil(PART);
        let weigh = |(place, item): (usize, &&Item<T>)| {
            let additions = (PART - place % PART) + (parts - place / PART);
            let size: f64 = item.terms.iter().map(|(_, coefficient)| coefficient.abs()).sum();
            size * (1 + item.terms.len() + additions) as f64
        };
        items.iter().enumerate().map(weigh).sum()
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
        out.fill(zero);
        part.fill(zero);
        for source in &self.sources {
            let from = block ^ source.x;
            // SAFETY: blocks below the number of blocks are in bounds, and nobody writes, by this function's contract.
            let amplitudes = unsafe { state.groups_ref(from * groups, groups) };
            for item in &source.items {
                let signed = |(z, c): &(usize, f64)| if (from & z).count_ones() & 1 == 1 { -c } else { *c };
                let coefficient: f64 = item.terms.iter().map(signed).sum();
                let string = item.unit.scaled(T::from_f64(coefficient));
                isa.run(Accumulate { out: part, source: amplitudes, string: &string });
                waiting += 1;
                if waiting == PART {
                    add(out, part);
                    part.fill(zero);
                    waiting = 0;
                }
            }
        }
        if waiting > 0 {
            add(out, part);
        }
    }
}

fn add<T: Real>(out: &mut [[T; LANES]], part: &[[T; LANES]]) {
    for (out, part) in out.iter_mut().zip(part) {
        *out = std::array::from_fn(|l| out[l] + part[l]);
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
                .map(|list| LaneString::new(0, 0, Factor::Real(list[term]).times_i_power(3 * term as u32 & 3)))
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
