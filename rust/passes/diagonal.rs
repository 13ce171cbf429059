//! Diagonal operations inside a coset: phases from small tables.
//!
//! Split the coordinates of a coset into low ones ([`LOW_BITS`]) and high ones. A phase exp(-i Σ θ s) is then the product of
//! three: strings on low coordinates make a table over these, strings on high coordinates one over those, strings on
//! neither a number for the coset. Where a string sees both low and high (or the coset), it flips the sign of a low term:
//! each distinct flip is one bit that picks among several low tables. Where that would be too many tables (couplings of
//! every pair), the terms are grouped by their low mask, and each group is a phase by high coordinate with a sign by the
//! low ones.

use num_complex::Complex64;

use super::space::Space;
use super::spread::{Combine, Flip, Spread};
use crate::kernel::lanes::Real;

/// Low coordinates of the tables.
pub const LOW_BITS: u32 = 7;
/// Distinct flips that low tables are made for.
const FLIPS: usize = 4;

/// Numbers with one low mask.
#[derive(Clone, Debug)]
pub struct Group<T: Real, N> {
    mask: usize,
    numbers: Spread<N>,
    /// Signs by lane, for vectors of even and of odd parity.
    signs: [T::Line; 2],
}

impl<T: Real, N: Combine> Group<T, N> {
    fn new(mask: usize, numbers: Spread<N>) -> Self {
        let mut signs = [T::Line::default(); 2];
        for (parity, line) in signs.iter_mut().enumerate() {
            for (lane, sign) in line.as_mut().iter_mut().enumerate() {
                *sign = T::from_f64(if is_odd(lane & mask) ^ (parity == 1) { -1.0 } else { 1.0 });
            }
        }
        Self { mask, numbers, signs }
    }

    /// Signs of the lanes of vector `low` of the low coordinates.
    #[inline(always)]
    pub fn sign(&self, low: usize) -> *const T {
        self.signs[usize::from(is_odd(low & (self.mask >> T::LANE_BITS)))].as_ref().as_ptr()
    }
}

/// Diagonal strings with a number each, sorted by what they see of a coset.
struct Sorted {
    low_bits: u32,
    high_size: usize,
    low: Vec<(usize, Flip, f64)>,
    flips: Vec<Flip>,
    grouped: Vec<(usize, Flip, f64)>,
    high: Vec<(Flip, f64)>,
}

impl Sorted {
    fn new(terms: &[(u64, f64)], space: &Space) -> Self {
        let low_bits = LOW_BITS.min(space.dimension());
        let mut low: Vec<(usize, Flip, f64)> = vec![];
        let mut flips: Vec<Flip> = vec![];
        let mut high = vec![];
        for &(z, value) in terms {
            let local = space.dual(z);
            let flip = Flip { high: local >> low_bits, coset: if space.leaves(z) { z as usize } else { 0 } };
            match local & ((1 << low_bits) - 1) {
                0 => high.push((flip, value)),
                mask => {
                    if !flip.is_fixed() && !flips.contains(&flip) {
                        flips.push(flip);
                    }
                    low.push((mask, flip, value));
                }
            }
        }
        let mut grouped = vec![];
        if flips.len() > FLIPS {
            flips.clear();
            (low, grouped) = low.into_iter().partition(|(_, flip, _)| flip.is_fixed());
        }
        let high_size = 1usize << (space.dimension() - low_bits);
        Self { low_bits, high_size, low, flips, grouped, high }
    }

    /// Calls `take(pattern of flips, low coordinates, numbers with their signs)` for all entries of the low tables.
    fn each_low_entry(&self, mut take: impl FnMut(usize, usize, &mut dyn Iterator<Item = f64>)) {
        let place = |flip: &Flip| self.flips.iter().position(|own| own == flip).map_or(0, |j| 1 << j);
        let bits: Vec<usize> = self.low.iter().map(|(_, flip, _)| place(flip)).collect();
        for pattern in 0..1usize << self.flips.len() {
            for index in 0..1usize << self.low_bits {
                let one = |((mask, _, value), bit): (&(usize, Flip, f64), &usize)| {
                    if is_odd(mask & index) ^ (bit & pattern != 0) { -value } else { *value }
                };
                take(pattern, index, &mut self.low.iter().zip(&bits).map(one));
            }
        }
    }

    fn spread<N: Combine>(&self, number: impl Fn(f64) -> N) -> Spread<N> {
        Spread::new(self.high_size, self.high.iter().map(|(flip, value)| (*flip, number(*value))))
    }

    fn groups<T: Real, N: Combine>(&self, number: impl Fn(f64) -> N) -> Vec<Group<T, N>> {
        let mut masks: Vec<usize> = vec![];
        for (mask, ..) in &self.grouped {
            if !masks.contains(mask) {
                masks.push(*mask);
            }
        }
        let group = |mask: usize| {
            let own = self.grouped.iter().filter(|(other, ..)| *other == mask);
            let numbers = own.map(|(_, flip, value)| (*flip, number(*value)));
            Group::new(mask, Spread::new(self.high_size, numbers))
        };
        masks.into_iter().map(group).collect()
    }
}

/// Which low table the flips select.
fn pattern(flips: &[Flip], high: usize, rep: usize) -> usize {
    flips.iter().enumerate().map(|(j, flip)| usize::from(flip.is_odd(high, rep)) << j).sum()
}

/// A diagonal operation in the coordinates of a space.
#[derive(Clone, Debug)]
pub struct Diagonal<T: Real> {
    /// For each pattern of flips and each vector of low coordinates: cosine lanes, then sine lanes.
    pub low: Vec<T::Line>,
    flips: Vec<Flip>,
    high: Spread<Complex64>,
    /// Phases that depend on low and high coordinates in more ways than the tables hold.
    pub groups: Vec<Group<T, Complex64>>,
    factor: Complex64,
}

/// What multiplies the vectors of one value of the high coordinates.
#[derive(Clone, Copy, Debug, Default)]
pub struct HighFactor<T> {
    /// Real part.
    pub re: T,
    /// Imaginary part.
    pub im: T,
    /// First line of the low table.
    pub low: usize,
}

/// A worker's room for the factors of one coset.
#[derive(Clone, Debug, Default)]
pub struct CosetFactors<T> {
    /// By high coordinate.
    pub high: Vec<HighFactor<T>>,
    /// By group, then by high coordinate: cosine and sine.
    pub groups: Vec<[T; 2]>,
    combined: Vec<(usize, Complex64)>,
}

fn unit(angle: f64) -> Complex64 {
    let (sin, cos) = libm::sincos(angle);
    Complex64::new(cos, -sin)
}

fn is_odd(masked: usize) -> bool {
    masked.count_ones() & 1 == 1
}

impl<T: Real> Diagonal<T> {
    /// From pairs (z, θ) and a factor of everything.
    pub fn new(terms: &[(u64, f64)], space: &Space, factor: Complex64) -> Self {
        let sorted = Sorted::new(terms, space);
        let vectors = 1usize << (sorted.low_bits - T::LANE_BITS);
        let mut low = vec![T::Line::default(); (2 * vectors) << sorted.flips.len()];
        sorted.each_low_entry(|pattern, index, angles| {
            let line = 2 * (pattern * vectors + (index >> T::LANE_BITS));
            let lane = index & ((1 << T::LANE_BITS) - 1);
            // A product of phases, not the phase of a sum: huge angles then lose nothing.
            let phase = angles.map(unit).reduce(|p, q| p * q).unwrap_or(Complex64::new(1.0, 0.0));
            low[line].as_mut()[lane] = T::from_f64(phase.re);
            low[line + 1].as_mut()[lane] = T::from_f64(phase.im);
        });
        Self { low, high: sorted.spread(unit), groups: sorted.groups(unit), flips: sorted.flips, factor }
    }

    /// Takes a factor of everything on if it does not become smaller than `least` in all.
    pub fn absorb(&mut self, factor: Complex64, least: f64) -> bool {
        let product = self.factor * factor;
        let fits = product.norm() >= least;
        if fits {
            self.factor = product;
        }
        fits
    }

    /// The factors of the coset of `rep`.
    pub fn prepare(&self, rep: usize, room: &mut CosetFactors<T>) {
        let lines = self.low.len() >> self.flips.len();
        let CosetFactors { high: factors, groups, combined } = room;
        factors.clear();
        self.high.each(rep, combined, |high, phase| {
            let factor = phase * self.factor;
            let low = pattern(&self.flips, high, rep) * lines;
            factors.push(HighFactor { re: T::from_f64(factor.re), im: T::from_f64(factor.im), low });
        });
        groups.clear();
        for group in &self.groups {
            group.numbers.each(rep, combined, |_, phase| groups.push([T::from_f64(phase.re), T::from_f64(phase.im)]));
        }
    }
}

/// A sum of diagonal strings in the coordinates of a space: the same tables with sums in place of products.
#[derive(Clone, Debug)]
pub struct DiagonalSum<T: Real> {
    /// For each pattern of flips and each vector of low coordinates: one line.
    pub low: Vec<T::Line>,
    flips: Vec<Flip>,
    high: Spread<f64>,
    /// Values that depend on low and high coordinates in more ways than the tables hold.
    pub groups: Vec<Group<T, f64>>,
}

/// What is added for one value of the high coordinates.
#[derive(Clone, Copy, Debug, Default)]
pub struct HighSum<T> {
    /// The value.
    pub value: T,
    /// First line of the low table.
    pub low: usize,
}

/// A worker's room for the values of one coset.
#[derive(Clone, Debug, Default)]
pub struct CosetSums<T> {
    /// By high coordinate.
    pub high: Vec<HighSum<T>>,
    /// By group, then by high coordinate.
    pub groups: Vec<T>,
    combined: Vec<(usize, f64)>,
}

impl<T: Real> DiagonalSum<T> {
    /// From pairs (z, coefficient).
    pub fn new(terms: &[(u64, f64)], space: &Space) -> Self {
        let sorted = Sorted::new(terms, space);
        let vectors = 1usize << (sorted.low_bits - T::LANE_BITS);
        let mut low = vec![T::Line::default(); vectors << sorted.flips.len()];
        sorted.each_low_entry(|pattern, index, values| {
            let lane = index & ((1 << T::LANE_BITS) - 1);
            low[pattern * vectors + (index >> T::LANE_BITS)].as_mut()[lane] = T::from_f64(values.sum());
        });
        Self { low, high: sorted.spread(|value| value), groups: sorted.groups(|value| value), flips: sorted.flips }
    }

    /// Most numbers that enter one entry of the diagonal one after the other.
    pub fn additions(&self) -> usize {
        self.groups.len() + 3
    }

    /// The values of the coset of `rep`.
    pub fn prepare(&self, rep: usize, room: &mut CosetSums<T>) {
        let lines = self.low.len() >> self.flips.len();
        let CosetSums { high: sums, groups, combined } = room;
        sums.clear();
        self.high.each(rep, combined, |high, value| {
            sums.push(HighSum { value: T::from_f64(value), low: pattern(&self.flips, high, rep) * lines });
        });
        groups.clear();
        for group in &self.groups {
            group.numbers.each(rep, combined, |_, value| groups.push(T::from_f64(value)));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::space::Span;
    use super::*;

    /// Phase of one index put together from the tables.
    fn phase(diagonal: &Diagonal<f64>, space: &Space, rep: usize, local: usize) -> Complex64 {
        let mut room = CosetFactors::default();
        diagonal.prepare(rep, &mut room);
        let low_bits = LOW_BITS.min(space.dimension());
        let (low, high) = (local & ((1 << low_bits) - 1), local >> low_bits);
        let HighFactor { re, im, low: first } = room.high[high];
        let line = first + 2 * (low >> 3);
        let table = Complex64::new(diagonal.low[line].0[low & 7], diagonal.low[line + 1].0[low & 7]);
        let groups = diagonal.groups.iter().enumerate().map(|(g, group)| {
            let [re, im] = room.groups[g * room.high.len() + high];
            Complex64::new(re, if is_odd(group.mask & low) { -im } else { im })
        });
        groups.fold(table * Complex64::new(re, im), |p, q| p * q)
    }

    #[test]
    fn tables_multiply_to_the_phase_of_every_index() {
        let mut span = Span::of_low_bits(5);
        assert!((0..5).all(|j| span.admit(0b11 << (7 + j), 10)));
        let space = Space::new(span.filled(10));
        let ring: Vec<(u64, f64)> = (0..14).map(|q| (1u64 << q | 1 << ((q + 1) % 14), 0.1 + 0.01 * q as f64)).collect();
        let pairs: Vec<(u64, f64)> =
            (0..14).flat_map(|a| (0..a).map(move |b| (1u64 << a | 1 << b, 0.03 * (a + 2 * b) as f64))).collect();
        for terms in [&ring, &pairs] {
            let diagonal = Diagonal::<f64>::new(terms, &space, Complex64::new(0.5, 0.0));
            for number in [0, 3, 9, 15] {
                let rep = space.representative(number);
                for local in 0..1 << 10 {
                    let index = rep as u64 ^ space.vector(local);
                    let angle: f64 =
                        terms.iter().map(|(z, a)| if (index & z).count_ones() & 1 == 1 { -a } else { *a }).sum();
                    let difference = phase(&diagonal, &space, rep, local) - 0.5 * unit(angle);
                    // 91 unit factors, each rounded to 3 u, u = 1.1e-16.
                    assert!(difference.norm() < 91.0 * 3.4e-16, "{number} {local}: {difference}");
                }
            }
        }
    }
}
