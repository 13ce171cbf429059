//! Copies of whole vectors: between layouts, between a complex vector and its folded parts.
//!
//! A real state of n qubits is folded into a complex vector of n - 1 qubits, see [`crate::action`]: the half with top qubit 0
//! becomes the real parts, the half with top qubit 1 the imaginary parts. The Chebyshev sum of a real state under a real
//! operator is (sum of even terms) + i (sum of odd terms), both real, both kept folded until the end.

use super::VectorWork;
use super::bodies::{product, registers};
use super::image::pair;
use super::lanes::Real;
use super::tile::Place;
use super::vector::Vector;
use crate::passes::tiles::TILE_BITS;

/// Tiles between the one that a [`Refill`] copies and the one that it fetches.
const LEAD: usize = 4;

/// Copies vectors between places, splitting or interleaving amplitudes and multiplying by a number on the way.
pub struct Copy<'a, T> {
    /// Where they come from.
    pub from: Place<'a, T>,
    /// Where they go; may be where they come from.
    pub to: Place<'a, T>,
    /// How many vectors of real (and of imaginary) parts.
    pub vectors: usize,
    /// (c, s): the factor c + i s.
    pub factor: Option<(T, T)>,
}

impl<T: Real> VectorWork<T> for Copy<'_, T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: both places hold that many vectors; nobody else uses the second meanwhile or writes to
    /// the first.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let lanes = 1usize << T::LANE_BITS;
        for vector in 0..self.vectors {
            // SAFETY: by contract.
            unsafe {
                let (mut a, mut b) = pair::<V>(self.from.address(vector));
                if self.from.interleaved {
                    (a, b) = V::split(a, b);
                }
                if let Some((c, s)) = self.factor {
                    (a, b) = product(V::splat(c), V::splat(s), a, b);
                }
                if self.to.interleaved {
                    (a, b) = V::interleave(a, b);
                }
                let address = self.to.address(vector);
                a.store(address);
                b.store(address.add(lanes));
            }
        }
    }
}

/// A coset that is copied to a buffer tile by tile, while another one is at work.
pub struct Refill<'a, T> {
    /// Where it lies.
    pub from: Place<'a, T>,
    /// Where it goes, as vectors of real and imaginary parts.
    pub to: *mut T,
}

impl<T: Real> Refill<'_, T> {
    /// Copies one tile, and fetches a later one.
    ///
    /// # Safety
    /// Both places hold `tiles` tiles that nobody else uses or writes to.
    #[inline(always)]
    pub unsafe fn tile<V: Vector<Element = T>>(&self, tile: usize, tiles: usize) {
        let lanes = 1usize << T::LANE_BITS;
        // SAFETY: by contract.
        unsafe {
            if tile + LEAD < tiles {
                let base = (tile + LEAD) << TILE_BITS;
                registers!(t => {
                    let address = self.from.address(base + t);
                    V::prefetch(address);
                    V::prefetch(address.add(lanes));
                });
            }
            let base = tile << TILE_BITS;
            registers!(t => {
                let (mut a, mut b) = pair::<V>(self.from.address(base + t));
                if self.from.interleaved {
                    (a, b) = V::split(a, b);
                }
                let to = self.to.add((base + t) << (T::LANE_BITS + 1));
                a.store(to);
                b.store(to.add(lanes));
            });
        }
    }
}

/// Folds a piece of an interleaved real state: real parts of `low` and of `high` become real and imaginary parts.
pub struct Fold<T> {
    /// From the half with top qubit 0.
    pub low: *const T,
    /// The same place in the other half.
    pub high: *const T,
    /// Where they go; may be `low`.
    pub to: *mut T,
    /// How many vectors of real (and of imaginary) parts.
    pub vectors: usize,
}

impl<T: Real> VectorWork<T> for Fold<T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: all three hold that many vectors; nobody else uses the last meanwhile or writes to the
    /// others.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let lanes = 1usize << T::LANE_BITS;
        for vector in 0..self.vectors {
            let place = vector << (T::LANE_BITS + 1);
            // SAFETY: by contract.
            unsafe {
                let (first, second) = pair::<V>(self.low.add(place));
                let (a, _) = V::split(first, second);
                let (first, second) = pair::<V>(self.high.add(place));
                let (b, _) = V::split(first, second);
                a.store(self.to.add(place));
                b.store(self.to.add(place + lanes));
            }
        }
    }
}

/// Unfolds a piece: even + i odd, interleaved, where even and odd are folded.
pub struct Unfold<T> {
    /// Real parts of the result.
    pub even: *const T,
    /// Imaginary parts of the result.
    pub odd: *const T,
    /// To the half with top qubit 0.
    pub low: *mut T,
    /// The same place in the other half.
    pub high: *mut T,
    /// How many vectors.
    pub vectors: usize,
}

impl<T: Real> VectorWork<T> for Unfold<T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: all four hold that many vectors; the last two overlap nothing, and nobody else uses them
    /// meanwhile or writes to the others.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let lanes = 1usize << T::LANE_BITS;
        for vector in 0..self.vectors {
            let place = vector << (T::LANE_BITS + 1);
            // SAFETY: by contract.
            unsafe {
                let (a, b) = pair::<V>(self.even.add(place));
                let (c, d) = pair::<V>(self.odd.add(place));
                for (to, re, im) in [(self.low, a, c), (self.high, b, d)] {
                    let (first, second) = V::interleave(re, im);
                    first.store(to.add(place));
                    second.store(to.add(place + lanes));
                }
            }
        }
    }
}
