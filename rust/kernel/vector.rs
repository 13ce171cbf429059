//! The few vector operations that all arithmetic on tiles is made of, and their portable form.
//!
//! A vector holds the real (or the imaginary) parts of 2^[`Real::LANE_BITS`] neighbouring amplitudes: eight doubles, or
//! sixteen singles. Every instruction set uses the same number of lanes, only in one, two or four registers, and every
//! operation rounds once. So the bodies in [`super::tile`] give the same bits everywhere. There is no fused multiply-add
//! on purpose: the portable form could not have one.
//!
//! Measured and left out: `[T; 8]` arrays for all instruction sets, with the compiler vectorising the bodies (the tile
//! loops came out about ten times slower: spills and scalar shuffles).

use super::lanes::Real;

/// Arithmetic lane by lane: what vectors and the registers that they consist of have in common.
///
/// # Safety
/// Each function may only be called where the processor has the instruction set of the implementing type.
pub trait Lanes: Copy {
    /// What a lane holds.
    type Element: Real;
    /// The same value in all lanes.
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn splat(value: Self::Element) -> Self;
    /// The sum.
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn add(self, other: Self) -> Self;
    /// The difference.
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn sub(self, other: Self) -> Self;
    /// The product.
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn mul(self, other: Self) -> Self;
}

/// `1 << Real::LANE_BITS` lanes of reals.
///
/// # Safety
/// As [`Lanes`].
pub trait Vector: Lanes {
    /// Whether the bodies should be unrolled over constant register masks.
    const UNROLLED: bool;
    /// One register of a vector. Where there are several, bodies that keep to their lanes take one after the other: with all
    /// at once there are not enough registers.
    type Part: Lanes<Element = Self::Element>;
    /// How many registers a vector has.
    const PARTS: usize;

    /// Register `number`.
    ///
    /// # Safety
    /// The instruction set is there, and so is the register.
    unsafe fn part(self, number: usize) -> Self::Part;
    /// The vector with another register `number`.
    ///
    /// # Safety
    /// As [`Vector::part`].
    unsafe fn with_part(self, number: usize, part: Self::Part) -> Self;
    /// Reads all lanes.
    ///
    /// # Safety
    /// Besides the instruction set: `from` points to that many readable elements; no alignment is asked for.
    unsafe fn load(from: *const Self::Element) -> Self;
    /// Writes all lanes.
    ///
    /// # Safety
    /// Besides the instruction set: `to` points to that many writable elements; no alignment is asked for.
    unsafe fn store(self, to: *mut Self::Element);
    /// Lane `l` takes what lane `l ^ m` held; `m` is below the number of lanes.
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn exchange(self, m: usize) -> Self;
    /// The same where it is known whether `m` reaches across registers.
    ///
    /// # Safety
    /// As [`Vector::exchange`], and `ACROSS` is [`Vector::reaches_across`] of `m`.
    #[inline(always)]
    unsafe fn exchange_known<const ACROSS: bool>(self, m: usize) -> Self {
        // SAFETY: by contract.
        unsafe { self.exchange(m) }
    }
    /// Whether exchanging lanes by `m` exchanges registers, too.
    #[inline(always)]
    fn reaches_across(_m: usize) -> bool {
        false
    }
    /// Real and imaginary parts of amplitudes that lie as (re, im, re, im, …) in two vectors.
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn split(first: Self, second: Self) -> (Self, Self);
    /// The inverse of [`Vector::split`].
    ///
    /// # Safety
    /// The instruction set is there.
    unsafe fn interleave(re: Self, im: Self) -> (Self, Self);
    /// Asks for a cache line ahead of its use; any address will do.
    #[inline(always)]
    fn prefetch(_line: *const Self::Element) {}
}

/// The form for every processor: plain arrays, left to the compiler.
#[derive(Clone, Copy)]
pub struct Portable<T, const LANES: usize>([T; LANES]);

impl<T: Real, const LANES: usize> Lanes for Portable<T, LANES> {
    type Element = T;
    #[inline(always)]
    unsafe fn splat(value: T) -> Self {
        Self([value; LANES])
    }
    #[inline(always)]
    unsafe fn add(self, other: Self) -> Self {
        Self(std::array::from_fn(|l| self.0[l] + other.0[l]))
    }
    #[inline(always)]
    unsafe fn sub(self, other: Self) -> Self {
        Self(std::array::from_fn(|l| self.0[l] - other.0[l]))
    }
    #[inline(always)]
    unsafe fn mul(self, other: Self) -> Self {
        Self(std::array::from_fn(|l| self.0[l] * other.0[l]))
    }
}

impl<T: Real, const LANES: usize> Vector for Portable<T, LANES> {
    const UNROLLED: bool = false;
    type Part = Self;
    const PARTS: usize = 1;

    #[inline(always)]
    unsafe fn part(self, _number: usize) -> Self {
        self
    }
    #[inline(always)]
    unsafe fn with_part(self, _number: usize, part: Self) -> Self {
        part
    }

    #[inline(always)]
    unsafe fn load(from: *const T) -> Self {
        // SAFETY: the caller vouches for the elements; arrays are read without alignment.
        Self(unsafe { from.cast::<[T; LANES]>().read_unaligned() })
    }
    #[inline(always)]
    unsafe fn store(self, to: *mut T) {
        // SAFETY: as above.
        unsafe { to.cast::<[T; LANES]>().write_unaligned(self.0) }
    }
    #[inline(always)]
    unsafe fn exchange(self, m: usize) -> Self {
        Self(std::array::from_fn(|l| self.0[(l ^ m) % LANES]))
    }
    #[inline(always)]
    unsafe fn split(first: Self, second: Self) -> (Self, Self) {
        let at = |place: usize| if place < LANES { first.0[place] } else { second.0[place - LANES] };
        (Self(std::array::from_fn(|l| at(2 * l))), Self(std::array::from_fn(|l| at(2 * l + 1))))
    }
    #[inline(always)]
    unsafe fn interleave(re: Self, im: Self) -> (Self, Self) {
        let at = |place: usize| if place & 1 == 0 { re.0[place / 2] } else { im.0[place / 2] };
        (Self(std::array::from_fn(at)), Self(std::array::from_fn(|l| at(LANES + l))))
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Isa, VectorWork};
    use super::*;

    /// Every operation of a vector type on fixed numbers, flattened.
    struct Exercise;

    impl<T: Real> VectorWork<T> for Exercise {
        type Output = Vec<T>;
        unsafe fn run<V: Vector<Element = T>>(self) -> Vec<T> {
            let lanes = 1usize << T::LANE_BITS;
            let numbers = |seed: usize| -> Vec<T> {
                (0..lanes).map(|l| T::from_f64(((l * 37 + seed * 101) % 29) as f64 / 7.0 - 1.9)).collect()
            };
            let (a, b) = (numbers(1), numbers(2));
            let mut found = Vec::new();
            // SAFETY: the instruction set was chosen by the caller; the arrays hold one vector each.
            unsafe {
                let (v, w) = (V::load(a.as_ptr()), V::load(b.as_ptr()));
                let (re, im) = V::split(v, w);
                let (first, second) = V::interleave(re, im);
                let exchanged = (0..lanes).map(|m| v.exchange(m));
                let all = [V::splat(a[3]), v.add(w), v.sub(w), v.mul(w), re, im, first, second];
                for vector in all.into_iter().chain(exchanged) {
                    let mut room = vec![T::default(); lanes];
                    vector.store(room.as_mut_ptr());
                    found.extend(room);
                }
            }
            found
        }
    }

    fn every_level_agrees<T: Real + std::fmt::Debug>() {
        // SAFETY: the exercise asks for nothing but the instruction set.
        let run = |isa: Isa| -> Vec<T> { unsafe { isa.run_vectors(Exercise) } };
        let baseline = run(Isa::BASELINE);
        for isa in Isa::available() {
            assert_eq!(run(isa), baseline, "{}", isa.name());
        }
        let lanes = 1usize << T::LANE_BITS;
        let row = |which: usize| &baseline[which * lanes..(which + 1) * lanes];
        // Interleaving undoes splitting, and lane l of an exchange by m holds lane l ^ m.
        let original = row(8).to_vec();
        assert_eq!(row(6), original);
        for m in 0..lanes {
            assert!((0..lanes).all(|l| row(8 + m)[l] == original[l ^ m]));
        }
        assert_eq!(row(4)[1], original[2]);
    }

    #[test]
    fn vectors_of_all_instruction_sets_agree() {
        every_level_agrees::<f64>();
        every_level_agrees::<f32>();
    }
}
