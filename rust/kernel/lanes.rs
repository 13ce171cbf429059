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

use std::ops::{Add, AddAssign, Mul, Neg, Sub};

use super::vector::{Portable, Vector};

/// Reals in a group: four amplitudes.
pub const LANES: usize = 8;
/// Amplitudes in a group, as a power of two.
pub const GROUP_BITS: u32 = 2;

/// Lanes of one vector, aligned to a cache line.
#[derive(Clone, Copy, Debug, PartialEq)]
#[repr(C, align(64))]
pub struct Line<T, const LANES: usize>(pub [T; LANES]);

impl<T: Copy + Default, const LANES: usize> Default for Line<T, LANES> {
    fn default() -> Self {
        Self([T::default(); LANES])
    }
}

impl<T, const LANES: usize> AsRef<[T]> for Line<T, LANES> {
    fn as_ref(&self) -> &[T] {
        &self.0
    }
}

impl<T, const LANES: usize> AsMut<[T]> for Line<T, LANES> {
    fn as_mut(&mut self) -> &mut [T] {
        &mut self.0
    }
}

/// f64 or f32.
pub trait Real:
    Copy
    + Default
    + std::fmt::Debug
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
    /// Amplitudes in a vector, as a power of two.
    const LANE_BITS: u32;
    /// One vector in memory.
    type Line: Copy + Default + std::fmt::Debug + PartialEq + Send + Sync + AsRef<[Self]> + AsMut<[Self]>;
    /// Vectors of every processor.
    type Portable: Vector<Element = Self>;
    /// Vectors of AVX2.
    #[cfg(target_arch = "x86_64")]
    type Avx2: Vector<Element = Self>;
    /// Vectors of AVX-512.
    #[cfg(target_arch = "x86_64")]
    type Avx512: Vector<Element = Self>;
    /// Rounds to this type.
    fn from_f64(value: f64) -> Self;
    /// Widens without loss.
    fn to_f64(self) -> f64;
}

impl Real for f64 {
    type Line = Line<Self, 8>;
    const LANE_BITS: u32 = 3;
    type Portable = Portable<Self, 8>;
    #[cfg(target_arch = "x86_64")]
    type Avx2 = super::x86_64::Double256;
    #[cfg(target_arch = "x86_64")]
    type Avx512 = super::x86_64::Double512;
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
    type Line = Line<Self, 16>;
    const LANE_BITS: u32 = 4;
    type Portable = Portable<Self, 16>;
    #[cfg(target_arch = "x86_64")]
    type Avx2 = super::x86_64::Single256;
    #[cfg(target_arch = "x86_64")]
    type Avx512 = super::x86_64::Single512;
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
    pub(super) fn parity(&self, source: usize) -> usize {
        parity(source & self.z)
    }
}

/// Whether the number of set bits is odd.
#[inline(always)]
pub(super) fn parity(masked: usize) -> usize {
    masked.count_ones() as usize & 1
}

#[inline(always)]
pub(super) fn permuted<T: Real, const M: usize>(lanes: &[T; LANES]) -> [T; LANES] {
    std::array::from_fn(|l| lanes[l ^ M])
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
pub(super) use for_each_permutation;
