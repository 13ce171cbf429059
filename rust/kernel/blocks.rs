//! Sums and products on one block of groups that stays in first-level cache.

use super::Work;
use super::lanes::{LANES, LaneString, Real, for_each_permutation, permuted};

/// out += factor · P in for the groups of one block; `source` is the block that the string's high bits select.
pub struct Accumulate<'a, T> {
    /// Sum so far.
    pub out: &'a mut [[T; LANES]],
    /// The block to read.
    pub source: &'a [[T; LANES]],
    /// The string with its factor, masks cut to the block.
    pub string: &'a LaneString<T>,
}

impl<T: Real> Work for Accumulate<'_, T> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        for_each_permutation!(self.string.m, accumulate, self.out, self.source, self.string);
    }
}

#[inline(always)]
fn accumulate<T: Real, const M: usize>(out: &mut [[T; LANES]], source: &[[T; LANES]], string: &LaneString<T>) {
    // The block length is a power of two, so the mask keeps the index in bounds and spares the check.
    let mask = source.len() - 1;
    for (q, out) in out.iter_mut().enumerate() {
        let from = (q ^ string.x) & mask;
        add_weighted::<T, M>(out, &string.weights[string.parity(from)], &source[from]);
    }
}

#[inline(always)]
fn add_weighted<T: Real, const M: usize>(out: &mut [T; LANES], weights: &[T; LANES], source: &[T; LANES]) {
    let source = permuted::<T, M>(source);
    *out = std::array::from_fn(|l| out[l] + weights[l] * source[l]);
}

/// out ← weights · source, lane by lane.
pub struct Weigh<'a, T> {
    /// Receives the products.
    pub out: &'a mut [[T; LANES]],
    /// The block to read.
    pub source: &'a [[T; LANES]],
    /// One weight for each lane.
    pub weights: &'a [[T; LANES]],
}

impl<T: Real> Work for Weigh<'_, T> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        for ((out, source), weights) in self.out.iter_mut().zip(self.source).zip(self.weights) {
            *out = std::array::from_fn(|l| weights[l] * source[l]);
        }
    }
}

/// out += part, lane by lane.
pub struct Gain<'a, T> {
    /// Sum so far.
    pub out: &'a mut [[T; LANES]],
    /// What joins it.
    pub part: &'a [[T; LANES]],
}

impl<T: Real> Work for Gain<'_, T> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        for (out, part) in self.out.iter_mut().zip(self.part) {
            *out = std::array::from_fn(|l| out[l] + part[l]);
        }
    }
}
