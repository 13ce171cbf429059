//! One rotation, or two joined ones, on pairs of groups in place.

use std::ops::Range;

use super::Work;
use super::lanes::{Factor, GROUP_BITS, LANES, LaneString, Real, for_each_permutation, mixed, parity};
use super::shared::Shared;

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
        assert!(self.range.end <= self.rotation.units(self.state.groups()) && self.rotation.x < self.state.groups());
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
