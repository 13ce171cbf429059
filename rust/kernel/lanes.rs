//! The numbers that amplitudes are made of.
//!
//! [`Real`] is double or single precision, with the vectors of each instruction set that hold it. Sums over whole states
//! ([`super::reduce`]) work on *groups* of eight reals, that is four neighbouring amplitudes as (re, im) pairs.

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
