//! One array of amplitudes that several workers read and write, each in its own part.

use std::marker::PhantomData;

use num_complex::Complex;

use super::lanes::{LANES, Real};

/// Amplitudes as plain reals (re, im, re, im, …), borrowed mutably for `'a` and handed out piecewise.
pub struct Shared<'a, T> {
    start: *mut T,
    reals: usize,
    borrow: PhantomData<&'a mut [T]>,
}

// SAFETY: a `Shared` is a mutable slice whose pieces are handed out by unsafe functions only; their callers promise that
// no two live pieces overlap unless both are read. With that promise, moving and sharing it is as safe as for `&mut [T]`.
unsafe impl<T: Send> Send for Shared<'_, T> {}
// SAFETY: as above.
unsafe impl<T: Send> Sync for Shared<'_, T> {}

impl<'a, T: Real> Shared<'a, T> {
    /// Takes over a mutable borrow of amplitudes.
    pub fn new(amplitudes: &'a mut [Complex<T>]) -> Self {
        Self { start: amplitudes.as_mut_ptr().cast(), reals: 2 * amplitudes.len(), borrow: PhantomData }
    }

    /// Takes over a mutable borrow of groups of lanes.
    #[inline(always)]
    pub fn over(groups: &'a mut [[T; LANES]]) -> Self {
        Self { start: groups.as_mut_ptr().cast(), reals: LANES * groups.len(), borrow: PhantomData }
    }

    /// Number of groups of lanes.
    #[inline(always)]
    pub fn groups(&self) -> usize {
        self.reals / LANES
    }

    /// Number of reals.
    #[inline(always)]
    pub fn reals(&self) -> usize {
        self.reals
    }

    /// Address of real number `place`.
    ///
    /// # Safety
    /// `place < self.reals()`; what is read and written through the address follows the rules of [`Shared::group`].
    #[inline(always)]
    pub unsafe fn at(&self, place: usize) -> *mut T {
        debug_assert!(place < self.reals);
        // SAFETY: in bounds by contract.
        unsafe { self.start.add(place) }
    }

    /// The lanes of one group, to read and write.
    ///
    /// # Safety
    /// - `group < self.groups()`.
    /// - While the reference lives, no other piece that overlaps it is in use.
    #[inline(always)]
    #[allow(clippy::mut_from_ref)]
    pub unsafe fn group(&self, group: usize) -> &mut [T; LANES] {
        debug_assert!(group < self.groups());
        // SAFETY: in bounds and unaliased by this function's contract; `Complex<T>` is two reals in memory order, so the
        // array has `reals` of them, and an array of T has the alignment of T.
        unsafe { &mut *self.start.add(group * LANES).cast() }
    }

    /// Groups `first .. first + count` as one slice, to read and write.
    ///
    /// # Safety
    /// As for [`Shared::group`], for every group named.
    #[inline(always)]
    #[allow(clippy::mut_from_ref)]
    pub unsafe fn groups_mut(&self, first: usize, count: usize) -> &mut [[T; LANES]] {
        debug_assert!(first + count <= self.groups());
        // SAFETY: see `group`.
        unsafe { std::slice::from_raw_parts_mut(self.start.add(first * LANES).cast(), count) }
    }

    /// Groups `first .. first + count` as one slice, to read.
    ///
    /// # Safety
    /// - In bounds, as for [`Shared::group`].
    /// - While the reference lives, nobody writes to these groups.
    #[inline(always)]
    pub unsafe fn groups_ref(&self, first: usize, count: usize) -> &[[T; LANES]] {
        debug_assert!(first + count <= self.groups());
        // SAFETY: see `group`.
        unsafe { std::slice::from_raw_parts(self.start.add(first * LANES).cast(), count) }
    }
}

/// Views amplitudes as groups of lanes; what is left over at the end (fewer than four amplitudes) is not covered.
pub fn as_groups<T: Real>(amplitudes: &[Complex<T>]) -> &[[T; LANES]] {
    let groups = 2 * amplitudes.len() / LANES;
    // SAFETY: `Complex<T>` is two reals in memory order and `[T; LANES]` has the alignment of T; the length is rounded down.
    unsafe { std::slice::from_raw_parts(amplitudes.as_ptr().cast(), groups) }
}

/// Views amplitudes as groups of lanes, to write; see [`as_groups`].
pub fn as_groups_mut<T: Real>(amplitudes: &mut [Complex<T>]) -> &mut [[T; LANES]] {
    let groups = 2 * amplitudes.len() / LANES;
    // SAFETY: as in `as_groups`, and the borrow is unique.
    unsafe { std::slice::from_raw_parts_mut(amplitudes.as_mut_ptr().cast(), groups) }
}
