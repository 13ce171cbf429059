//! Loops over groups of eight lanes, and the weights that a Pauli string has there.
//!
//! A string multiplies amplitude `k` by `i^{|x & z|} (-1)^{|k & z|}` and moves it to `k ^ x`. Write `k = 4 q + a`: group
//! `q`, position `a` inside it. Then the group moves to `q ^ (x >> 2)`, the position to `a ^ (x & 3)`, and the sign is the
//! parity of `q & (z >> 2)` times the parity of `a & (z & 3)`. The first parity picks one of two weight vectors, the
//! second is written into them.
//!
//! Worked example on three qubits: exp(-i θ X_0 X_2) has x = 0b101. Groups 0 and 1 are partners and lanes move by
//! `m = 2 · 0b01 + 1 = 3`: amplitude 0 takes from amplitude 5, its real part from that one's imaginary part:
//! re' = cos θ · re + sin θ · im(5), im' = cos θ · im - sin θ · re(5).

//!
//! **Loop indices.** Where a loop permutes lanes, its index passes through a mask or an exclusive or that the compiler cannot
//! see through. In a plainly counting loop it would vectorise across groups, with scalar loads and shuffles, several times
//! slower than the vector operations on one group that are meant.

use std::ops::{Add, AddAssign, Mul, Neg, Range, Sub};

use super::Work;
use super::shared::Shared;

/// Reals in a group: four amplitudes.
pub const LANES: usize = 8;
/// Amplitudes in a group, as a power of two.
pub const GROUP_BITS: u32 = 2;

/// f64 or f32.
pub trait Real:
    Copy
    + Default
    + PartialEq
    + Send
    + Sync
    + 'static
    + Add<Output = Self>
    + AddAssign
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Neg<Output = Self>
{
    /// Rounds to this type.
    fn from_f64(value: f64) -> Self;
    /// Widens without loss.
    fn to_f64(self) -> f64;
}

impl Real for f64 {
    #[inline(always)]
    fn from_f64(value: f64) -> Self {
        value
    }
    #[inline(always)]
    fn to_f64(self) -> f64 {
        self
    }
}

impl Real for f32 {
    #[inline(always)]
    fn from_f64(value: f64) -> Self {
        value as f32
    }
    #[inline(always)]
    fn to_f64(self) -> f64 {
        f64::from(self)
    }
}

/// A string with a complex factor that is real or imaginary, ready for the loops below: out = factor · P · in.
#[derive(Clone, Debug, PartialEq)]
pub struct LaneString<T> {
    /// Lane `l` takes from lane `l ^ m`.
    pub m: usize,
    /// Group `q` takes from group `q ^ x`.
    pub x: usize,
    /// The parity of `source group & z` picks the weights.
    pub z: usize,
    /// Weights by parity and by target lane.
    pub weights: [[T; LANES]; 2],
}

/// The factor in front of a string.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Factor {
    /// A real number.
    Real(f64),
    /// i times a real number.
    Imaginary(f64),
}

impl Factor {
    /// The factor times `i^turns`.
    pub fn times_i_power(self, turns: u32) -> Self {
        let turned = match (self, turns & 1) {
            (factor, 0) => factor,
            (Self::Real(value), _) => Self::Imaginary(value),
            (Self::Imaginary(value), _) => Self::Real(-value),
        };
        match (turned, turns & 2) {
            (factor, 0) => factor,
            (Self::Real(value), _) => Self::Real(-value),
            (Self::Imaginary(value), _) => Self::Imaginary(-value),
        }
    }
}

impl<T: Real> LaneString<T> {
    /// Prepares `factor · X^x Z^z`, where a string's own `i^{|x & z|}` is already part of the factor.
    pub fn new(x: u64, z: u64, factor: Factor) -> Self {
        let (x_in, z_in) = ((x & 3) as usize, (z & 3) as usize);
        let mut weights = [[T::default(); LANES]; 2];
        for (parity, row) in weights.iter_mut().enumerate() {
            for (lane, weight) in row.iter_mut().enumerate() {
                let source = (lane >> 1) ^ x_in;
                let odd = ((source & z_in).count_ones() as usize + parity) & 1 == 1;
                let value = match (factor, lane & 1) {
                    (Factor::Real(value), _) | (Factor::Imaginary(value), 1) => value,
                    (Factor::Imaginary(value), _) => -value,
                };
                *weight = T::from_f64(if odd { -value } else { value });
            }
        }
        let m = 2 * x_in + usize::from(matches!(factor, Factor::Imaginary(_)));
        Self { m, x: (x >> GROUP_BITS) as usize, z: (z >> GROUP_BITS) as usize, weights }
    }

    /// The string with all weights multiplied by a number.
    #[inline]
    pub fn scaled(&self, by: T) -> Self {
        Self { weights: self.weights.map(|row| row.map(|weight| weight * by)), ..*self }
    }

    /// The string that adds nothing.
    pub fn nothing() -> Self {
        Self { m: 0, x: 0, z: 0, weights: [[T::default(); LANES]; 2] }
    }

    /// The sum with a string that moves lanes and groups alike; at most one other parity than none may occur in both.
    pub fn plus(&self, other: &Self) -> Self {
        debug_assert!(self.m == other.m && self.x == other.x && (self.z == other.z || self.z * other.z == 0));
        let z = self.z | other.z;
        let row = |string: &Self, parity: usize| string.weights[if string.z == 0 { 0 } else { parity }];
        let weights = [0, 1].map(|parity| {
            let (own, others) = (row(self, parity), row(other, parity));
            std::array::from_fn(|l| own[l] + others[l])
        });
        Self { z, weights, ..*self }
    }

    /// Parity of the source group's sign bits.
    #[inline(always)]
    fn parity(&self, source: usize) -> usize {
        (source & self.z).count_ones() as usize & 1
    }
}

#[inline(always)]
fn permuted<T: Real, const M: usize>(lanes: &[T; LANES]) -> [T; LANES] {
    std::array::from_fn(|l| lanes[l ^ M])
}

/// `keep · own + weights · permuted(other)` lane by lane, the two products rounded, then the sum.
#[inline(always)]
fn mixed<T: Real, const M: usize>(
    keep: &[T; LANES],
    own: &[T; LANES],
    weights: &[T; LANES],
    other: &[T; LANES],
) -> [T; LANES] {
    let other = permuted::<T, M>(other);
    std::array::from_fn(|l| keep[l] * own[l] + weights[l] * other[l])
}

/// Compiles one body for the eight lane permutations and picks by `m`.
macro_rules! for_each_permutation {
    ($m:expr, $call:ident, $($argument:expr),*) => {
        match $m {
            0 => $call::<T, 0>($($argument),*),
            1 => $call::<T, 1>($($argument),*),
            2 => $call::<T, 2>($($argument),*),
            3 => $call::<T, 3>($($argument),*),
            4 => $call::<T, 4>($($argument),*),
            5 => $call::<T, 5>($($argument),*),
            6 => $call::<T, 6>($($argument),*),
            _ => $call::<T, 7>($($argument),*),
        }
    };
}

/// cos θ - i sin θ P on groups of lanes, where θ may depend on one parity of the index that partners share.
#[derive(Clone, Debug)]
pub struct LaneRotation<T> {
    m: usize,
    x: usize,
    z: usize,
    /// Parity mask of the angle, 0 where there is one angle.
    d: usize,
    /// Cosine by parity of `group & d` and by lane.
    keep: [[T; LANES]; 2],
    /// -i sin θ times the string, by that parity and by the parity of `source group & z`.
    weights: [[[T; LANES]; 2]; 2],
}

impl<T: Real> LaneRotation<T> {
    /// A rotation about `i^{y_count} X^x Z^z` by `angles[parity of index & d]`.
    pub fn new(x: u64, z: u64, d: u64, y_count: u32, angles: [f64; 2]) -> Self {
        let strings = angles.map(|angle| {
            let (sin, cos) = libm::sincos(angle);
            (cos, LaneString::<T>::new(x, z, Factor::Imaginary(-sin).times_i_power(y_count)))
        });
        Self::assembled(d, &strings)
    }

    /// A diagonal rotation exp(-i θ σ) of a block, given by its value where σ = +1.
    pub fn diagonal(z: u64, value: num_complex::Complex<f64>) -> Self {
        let string = LaneString::new(0, z, Factor::Imaginary(value.im));
        Self::assembled(0, &[(value.re, string.clone()), (value.re, string)])
    }

    fn assembled(d: u64, strings: &[(f64, LaneString<T>); 2]) -> Self {
        let inner =
            |group_parity: usize, lane: usize| ((lane as u64 >> 1 & d & 3).count_ones() as usize + group_parity) & 1;
        let keep = [0, 1].map(|parity| std::array::from_fn(|l| T::from_f64(strings[inner(parity, l)].0)));
        let row = |parity: usize, sign: usize| std::array::from_fn(|l| strings[inner(parity, l)].1.weights[sign][l]);
        let LaneString { m, x, z, .. } = strings[0].1;
        Self { m, x, z, d: (d >> GROUP_BITS) as usize, keep, weights: [0, 1].map(|p| [0, 1].map(|s| row(p, s))) }
    }

    /// Pairs of groups, or groups where none are paired, in a state of `groups` groups.
    pub fn units(&self, groups: usize) -> usize {
        if self.x == 0 { groups } else { groups / 2 }
    }

    /// Whether pairs stay inside blocks of this many groups.
    pub fn stays_within(&self, groups: usize) -> bool {
        self.x < groups
    }
}

#[inline(always)]
fn parity(masked: usize) -> usize {
    masked.count_ones() as usize & 1
}

/// Rotates groups of lanes in place. `range` counts as [`LaneRotation::units`] does.
pub struct Rotate<'a, T: Real> {
    /// The amplitudes.
    pub state: &'a Shared<'a, T>,
    /// Which pairs or groups.
    pub range: Range<usize>,
    /// The rotation.
    pub rotation: &'a LaneRotation<T>,
    /// 1 where the string's sign is turned for all groups, else 0.
    pub flip: usize,
    /// 1 where the parity of the angle is turned for all groups, else 0.
    pub other_angle: usize,
}

impl<T: Real> Work for Rotate<'_, T> {
    type Output = ();
    #[inline(always)]
    fn run(self) {
        if self.rotation.x == 0 {
            for_each_permutation!(self.rotation.m, rotate_alone, self);
        } else if self.rotation.d == 0 {
            for_each_permutation!(self.rotation.m, rotate_pairs, self);
        } else {
            for_each_permutation!(self.rotation.m, rotate_pairs_by_parity, self);
        }
    }
}

#[inline(always)]
fn rotate_alone<T: Real, const M: usize>(work: Rotate<T>) {
    let Rotate { state, range, rotation, flip, other_angle } = work;
    for q in range {
        let angle = parity(q & rotation.d) ^ other_angle;
        let weights = &rotation.weights[angle][parity(q & rotation.z) ^ flip];
        // SAFETY: the caller gave this range of groups to this worker alone.
        let own = unsafe { state.group(q) };
        *own = mixed::<T, M>(&rotation.keep[angle], own, weights, own);
    }
}

#[inline(always)]
fn rotate_pairs<T: Real, const M: usize>(work: Rotate<T>) {
    let (keep, weights) = (work.rotation.keep[work.other_angle], work.rotation.weights[work.other_angle]);
    each_pair::<T, M>(work, |_| (&keep, &weights));
}

#[inline(always)]
fn rotate_pairs_by_parity<T: Real, const M: usize>(work: Rotate<T>) {
    let (rotation, other_angle) = (work.rotation, work.other_angle);
    // Partners share the parity of the whole index; that of the group alone can differ, and then the lanes make up for it.
    each_pair::<T, M>(work, |group| {
        let angle = parity(group & rotation.d) ^ other_angle;
        (&rotation.keep[angle], &rotation.weights[angle])
    });
}

/// Mixes each pair with the cosines and weights that `coefficients(group)` gives for either group.
#[inline(always)]
fn each_pair<'a, T: Real, const M: usize>(
    work: Rotate<T>,
    coefficients: impl Fn(usize) -> (&'a [T; LANES], &'a [[T; LANES]; 2]),
) {
    let Rotate { state, range, rotation, flip, .. } = work;
    let pivot = rotation.x.ilog2();
    let below = (1usize << pivot) - 1;
    let between = parity(rotation.x & rotation.z);
    for pair in range {
        // A zero is put in at the pivot, the highest bit in which partners differ: each pair is met once.
        let q = ((pair & !below) << 1) | (pair & below);
        let partner = q ^ rotation.x;
        let sign = parity(q & rotation.z) ^ flip;
        let ((keep, weights), (partner_keep, partner_weights)) = (coefficients(q), coefficients(partner));
        // SAFETY: a pair number names two groups that no other pair number names, they differ since x is not 0, and the
        // caller gave this range of pairs to this worker alone.
        let (first, second) = unsafe { (state.group(q), state.group(partner)) };
        let new = mixed::<T, M>(keep, first, &weights[sign ^ between], second);
        *second = mixed::<T, M>(partner_keep, second, &partner_weights[sign], first);
        *first = new;
    }
}

/// out[q] += factor · (P in)[q] for the groups of one block; `source` is the block that the string's high bits select.
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
    pub fn new(of: impl Fn(usize) -> num_complex::Complex<f64>) -> Self {
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

/// Sums of products of two blocks in a fixed order: Σ (re re + im im) and Σ (re im' - im re'), eight partial sums each.
pub struct Dot<'a, T> {
    /// Left block, conjugated.
    pub left: &'a [[T; LANES]],
    /// Right block.
    pub right: &'a [[T; LANES]],
}

impl<T: Real> Work for Dot<'_, T> {
    type Output = (f64, f64);
    #[inline(always)]
    fn run(self) -> (f64, f64) {
        let mut straight = [0.0_f64; LANES];
        let mut crossed = [0.0_f64; LANES];
        let mask = self.left.len().min(self.right.len()) - 1;
        for q in 0..=mask {
            let (left, right) = (&self.left[q & mask], &self.right[q & mask]);
            for l in 0..LANES {
                straight[l] += left[l].to_f64() * right[l].to_f64();
                crossed[l] += left[l].to_f64() * right[l ^ 1].to_f64();
            }
        }
        let even = (crossed[0] + crossed[2]) + (crossed[4] + crossed[6]);
        let odd = (crossed[1] + crossed[3]) + (crossed[5] + crossed[7]);
        let real = ((straight[0] + straight[1]) + (straight[2] + straight[3]))
            + ((straight[4] + straight[5]) + (straight[6] + straight[7]));
        (real, even - odd)
    }
}

/// Σ |left - factor · right|² of two blocks.
pub struct SquaredDistance<'a, T> {
    /// Left block.
    pub left: &'a [[T; LANES]],
    /// Right block.
    pub right: &'a [[T; LANES]],
    /// Complex factor of the right block: (re, im).
    pub factor: (f64, f64),
}

impl<T: Real> Work for SquaredDistance<'_, T> {
    type Output = f64;
    #[inline(always)]
    fn run(self) -> f64 {
        let (re, im) = self.factor;
        let mut sums = [0.0_f64; LANES];
        let mask = self.left.len().min(self.right.len()) - 1;
        for q in 0..=mask {
            let (left, right) = (&self.left[q & mask], &self.right[q & mask]);
            for (l, sum) in sums.iter_mut().enumerate() {
                let signed = if l & 1 == 0 { -im } else { im };
                let turned = re * right[l].to_f64() + signed * right[l ^ 1].to_f64();
                let difference = left[l].to_f64() - turned;
                *sum += difference * difference;
            }
        }
        ((sums[0] + sums[1]) + (sums[2] + sums[3])) + ((sums[4] + sums[5]) + (sums[6] + sums[7]))
    }
}
