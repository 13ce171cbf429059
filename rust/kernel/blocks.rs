//! Sums and products on one block of groups that stays in first-level cache.

use num_complex::Complex;

use super::Work;
use super::lanes::{LANES, LaneString, Real, for_each_permutation, mixed, permuted};

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

/// A complex factor for each of the four amplitudes of a group, laid out for the loops: out = keep · own + weights · swapped.
#[derive(Clone, Copy, Debug)]
pub struct LaneFactors<T> {
    keep: [T; LANES],
    weights: [T; LANES],
}

impl<T: Real> LaneFactors<T> {
    /// Factor `of(a)` for the amplitude at position a.
    pub fn new(of: impl Fn(usize) -> Complex<f64>) -> Self {
        let signed = |l: usize| if l & 1 == 0 { -of(l >> 1).im } else { of(l >> 1).im };
        Self {
            keep: std::array::from_fn(|l| T::from_f64(of(l >> 1).re)),
            weights: std::array::from_fn(|l| T::from_f64(signed(l))),
        }
    }

    #[inline(always)]
    fn times(&self, own: &[T; LANES]) -> [T; LANES] {
        mixed::<T, 1>(&self.keep, own, &self.weights, own)
    }
}

/// a ← all · table · a on a block; an empty table stands for ones.
pub struct Multiply<'a, T> {
    /// The amplitudes.
    pub block: &'a mut [[T; LANES]],
    /// Factors for each group, or nothing.
    pub table: &'a [LaneFactors<T>],
    /// One factor for all.
    pub all: LaneFactors<T>,
}

impl<T: Real> Work for Multiply<'_, T> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        let mask = self.block.len() - 1;
        for q in 0..self.block.len() {
            // See the note on loop indices at the top.
            let own = &mut self.block[q & mask];
            *own = match self.table.get(q & mask) {
                Some(factors) => self.all.times(&factors.times(own)),
                None => self.all.times(own),
            };
        }
    }
}
