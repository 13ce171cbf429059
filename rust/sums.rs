//! Sums over a whole state in a fixed tree: norm, overlap, distance.
//!
//! Each block of 2^10 amplitudes gives one partial sum, the partial sums are added in pairs. The tree depends on the
//! length alone, so every number of threads gives the same bits. Partial sums are double precision for either type.

use std::sync::atomic::{AtomicU64, Ordering};

use num_complex::Complex;

use crate::error::{Error, Result};
use crate::kernel::Isa;
use crate::kernel::lanes::{GROUP_BITS, LANES, Real};
use crate::kernel::reduce::{Dot, SquaredDistance};
use crate::kernel::shared::as_groups;
use crate::team::{Control, no_thread, run, workers_for};

/// Amplitudes in a block, as a power of two.
pub const BLOCK_BITS: u32 = 10;

/// Adds in pairs, then pairs of pairs: the error grows with the logarithm of the length.
pub fn pairwise(values: &[f64]) -> f64 {
    match values {
        [] => 0.0,
        [one] => *one,
        _ => {
            let (left, right) = values.split_at(values.len().next_power_of_two() / 2);
            pairwise(left) + pairwise(right)
        }
    }
}

/// Calls `work(block)` for `blocks` blocks on up to `threads` workers; results in order of the blocks.
///
/// # Errors
/// As [`run`].
pub fn collect_blocks(
    blocks: usize,
    amplitudes: usize,
    threads: usize,
    control: &Control,
    work: impl Fn(usize) -> f64 + Sync,
) -> Result<Vec<f64>> {
    let partial: Vec<AtomicU64> = (0..blocks).map(|_| AtomicU64::new(0)).collect();
    run(workers_for(threads, amplitudes), control, |member| {
        member.each_piece(blocks, 16, |piece| {
            for block in piece {
                partial[block].store(work(block).to_bits(), Ordering::Relaxed);
            }
        })?;
        member.pass_done()
    })?;
    Ok(partial.into_iter().map(|bits| f64::from_bits(bits.into_inner())).collect())
}

/// Whole groups of a state; states shorter than one group are extended by zeros into `room`.
fn groups<'a, T: Real>(state: &'a [Complex<T>], room: &'a mut Vec<Complex<T>>) -> &'a [[T; LANES]] {
    if state.len() >= 1 << GROUP_BITS {
        return as_groups(state);
    }
    room.extend_from_slice(state);
    room.resize(1 << GROUP_BITS, Complex::new(T::default(), T::default()));
    as_groups(room)
}

fn over_pairs<T: Real, R: Into<f64>>(
    left: &[Complex<T>],
    right: &[Complex<T>],
    threads: usize,
    work: impl Fn(&[[T; LANES]], &[[T; LANES]]) -> R + Sync,
) -> Result<f64> {
    if left.len() != right.len() {
        return Err(Error::StateShape {
            found: format!("{} and {} amplitudes", left.len(), right.len()),
            expected: "two states on the same number of qubits".into(),
        });
    }
    let (mut left_room, mut right_room) = (vec![], vec![]);
    let (left, right) = (groups(left, &mut left_room), groups(right, &mut right_room));
    let size = left.len().min(1 << (BLOCK_BITS - GROUP_BITS));
    let blocks = left.len() / size;
    let partial = collect_blocks(blocks, LANES / 2 * left.len(), threads, &Control::default(), |block| {
        let place = block * size..(block + 1) * size;
        work(&left[place.clone()], &right[place]).into()
    })?;
    Ok(pairwise(&partial))
}

/// `<left|right>`.
///
/// # Errors
/// The lengths differ.
pub fn overlap<T: Real>(left: &[Complex<T>], right: &[Complex<T>], threads: usize) -> Result<Complex<f64>> {
    let isa = Isa::chosen()?;
    let re = over_pairs(left, right, threads, |left, right| isa.run(Dot { left, right }).0)?;
    let im = over_pairs(left, right, threads, |left, right| isa.run(Dot { left, right }).1)?;
    Ok(Complex::new(re, im))
}

/// Sets all amplitudes to zero; each worker writes a contiguous share, the one that it works on later.
///
/// # Errors
/// A thread cannot be started.
pub fn clear<T: Real>(state: &mut [Complex<T>], threads: usize) -> Result<()> {
    let workers = workers_for(threads, state.len());
    let share = state.len().div_ceil(workers).max(1);
    std::thread::scope(|scope| {
        for part in state.chunks_mut(share) {
            let zero = move || part.fill(Complex::new(T::default(), T::default()));
            std::thread::Builder::new().spawn_scoped(scope, zero).map_err(|_| no_thread(workers))?;
        }
        Ok(())
    })
}

/// The square of the 2-norm of each block.
///
/// # Errors
/// As [`run`].
pub fn squared_norms<T: Real>(state: &[Complex<T>], threads: usize) -> Result<Vec<f64>> {
    let isa = Isa::chosen()?;
    let mut room = vec![];
    let state = groups(state, &mut room);
    let size = state.len().min(1 << (BLOCK_BITS - GROUP_BITS));
    collect_blocks(state.len() / size, LANES / 2 * state.len(), threads, &Control::default(), |block| {
        let block = &state[block * size..(block + 1) * size];
        isa.run(Dot { left: block, right: block }).0
    })
}

/// ‖left - factor · right‖.
///
/// # Errors
/// The lengths differ.
pub fn distance<T: Real>(
    left: &[Complex<T>],
    right: &[Complex<T>],
    factor: Complex<f64>,
    threads: usize,
) -> Result<f64> {
    let isa = Isa::chosen()?;
    let factor = (factor.re, factor.im);
    let squared = over_pairs(left, right, threads, |left, right| isa.run(SquaredDistance { left, right, factor }))?;
    Ok(squared.sqrt())
}

#[cfg(test)]
mod tests {
    use super::*;
    use num_complex::Complex64;

    #[test]
    fn pairwise_sums_are_exact_on_whole_numbers() {
        let values: Vec<f64> = (1..=100).map(f64::from).collect();
        assert_eq!(pairwise(&values), 5050.0);
    }

    #[test]
    fn overlap_norm_and_distance_agree_with_their_definitions() {
        for length in [1usize, 2, 4, 64, 1 << 12] {
            let left: Vec<Complex64> = (0..length).map(|k| Complex64::new(k as f64, 1.0)).collect();
            let right: Vec<Complex64> = (0..length).map(|k| Complex64::new(2.0, -(k as f64))).collect();
            let direct: Complex64 = left.iter().zip(&right).map(|(a, b)| a.conj() * b).sum();
            // Whole numbers below 2^53: every sum is exact.
            assert_eq!(overlap(&left, &right, 2).unwrap(), direct);
            let apart: f64 = left.iter().zip(&right).map(|(a, b)| (a - b).norm_sqr()).sum();
            assert_eq!(distance(&left, &right, Complex::new(1.0, 0.0), 1).unwrap(), apart.sqrt());
            assert_eq!(pairwise(&squared_norms(&left, 2).unwrap()), left.iter().map(|a| a.norm_sqr()).sum::<f64>());
        }
    }
}
