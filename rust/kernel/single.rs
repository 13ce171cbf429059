//! The loop of one rotation alone; see [`crate::passes::single`].

use super::VectorWork;
use super::bodies::registers;
use super::lanes::Real;
use super::vector::Vector;
use crate::passes::single::{GROUP, Single};

/// Groups between the one at work and the one that is fetched.
const AHEAD: usize = 4;

/// One rotation on some groups of a state, or pairs of groups where partners are in another group.
pub struct Turning<'a, T: Real> {
    /// The rotation.
    pub single: &'a Single<T>,
    /// The state, interleaved.
    pub state: *mut T,
    /// First group or pair.
    pub first: usize,
    /// How many.
    pub count: usize,
    /// Whether vectors are fetched ahead.
    pub fetching: bool,
}

impl<T: Real> Single<T> {
    /// Groups, or pairs of them, that a state of that many reals has.
    pub fn units(&self, reals: usize) -> usize {
        (reals >> (T::LANE_BITS + GROUP.ilog2())) >> u32::from(self.groups != 0)
    }

    /// The first group of a pair: the one without the highest bit that tells the two apart.
    #[inline(always)]
    fn first_group(&self, unit: usize) -> usize {
        if self.groups == 0 {
            return unit;
        }
        let low = (1usize << self.groups.ilog2()) - 1;
        (unit & !low) << 1 | unit & low
    }
}

impl<T: Real> VectorWork<T> for Turning<'_, T> {
    type Output = ();

    /// # Safety
    /// Besides the instruction set: the units are below [`Single::units`] of the state, and nobody else uses their vectors.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) {
        let Turning { single, state, first, count, fetching } = self;
        let lanes = 1usize << T::LANE_BITS;
        // SAFETY: by this function's contract; fetching takes any address.
        unsafe {
            let cosine = V::splat(single.cosine);
            for unit in first..first + count {
                let group = single.first_group(unit);
                let own = state.add(group * GROUP * lanes);
                let other = state.add((group ^ single.groups) * GROUP * lanes);
                if fetching {
                    let coming = single.first_group(unit + AHEAD);
                    for start in [coming, coming ^ single.groups] {
                        let start = state.wrapping_add(start * GROUP * lanes);
                        registers!(t => { V::prefetch(start.wrapping_add(t * lanes)); });
                        if single.groups == 0 {
                            break;
                        }
                    }
                }
                let parity = |group: usize| (group & single.sign).count_ones() as usize & 1;
                let factors = single.factors[parity(group)].as_ptr().cast::<T>();
                if single.groups == 0 {
                    turn_inside::<V>(own, single, cosine, factors);
                } else {
                    let other_factors = single.factors[parity(group ^ single.groups)].as_ptr().cast::<T>();
                    turn_pair::<V>(own, other, single, cosine, factors, other_factors);
                }
            }
        }
    }
}

/// A group that is its own partner: everything is read before anything is written.
///
/// # Safety
/// The instruction set is there, and the group belongs to the caller.
#[inline(always)]
unsafe fn turn_inside<V: Vector>(
    group: *mut V::Element,
    single: &Single<V::Element>,
    cosine: V,
    factors: *const V::Element,
) {
    let lanes = 1usize << V::Element::LANE_BITS;
    // SAFETY: by contract.
    unsafe {
        let mut results = [cosine; GROUP];
        registers!(t => {
            let (a, b) = (V::load(group.add(t * lanes)), V::load(group.add((t ^ single.within) * lanes)));
            let factor = V::load(factors.add(t * lanes));
            results[t] = cosine.mul(a).add(factor.mul(b.exchange(single.lanes)));
        });
        registers!(t => { results[t].store(group.add(t * lanes)); });
    }
}

/// Two groups that are partners of each other.
///
/// # Safety
/// As [`turn_inside`], for both.
#[inline(always)]
unsafe fn turn_pair<V: Vector>(
    own: *mut V::Element,
    other: *mut V::Element,
    single: &Single<V::Element>,
    cosine: V,
    own_factors: *const V::Element,
    other_factors: *const V::Element,
) {
    let lanes = 1usize << V::Element::LANE_BITS;
    // SAFETY: by contract.
    unsafe {
        registers!(t => {
            let (here, there) = (t * lanes, (t ^ single.within) * lanes);
            let (a, b) = (V::load(own.add(here)), V::load(other.add(there)));
            let (v, w) = (V::load(own_factors.add(here)), V::load(other_factors.add(there)));
            cosine.mul(a).add(v.mul(b.exchange(single.lanes))).store(own.add(here));
            cosine.mul(b).add(w.mul(a.exchange(single.lanes))).store(other.add(there));
        });
    }
}
