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
use crate::kernel::lanes::Real;

/// Low coordinates of the tables.
pub const LOW_BITS: u32 = 7;
/// Distinct flips that low tables are made for.
const FLIPS: usize = 4;

/// A sign by high coordinates and by the coset.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Flip {
    high: usize,
    coset: usize,
}

impl Flip {
    fn is_fixed(self) -> bool {
        self.high == 0 && self.coset == 0
    }

    fn is_odd(self, high: usize, rep: usize) -> bool {
        ((self.high & high).count_ones() + (self.coset & rep).count_ones()) & 1 == 1
    }
}

/// exp(-i θ) with the flip of its sign.
#[derive(Clone, Copy, Debug)]
struct Term {
    flip: Flip,
    phase: Complex64,
}

impl Term {
    fn at(&self, high: usize, rep: usize) -> Complex64 {
        if self.flip.is_odd(high, rep) { self.phase.conj() } else { self.phase }
    }
}

/// Phases with one low mask.
#[derive(Clone, Debug)]
pub struct Group<T: Real> {
    mask: usize,
    terms: Vec<Term>,
    /// Signs by lane, for vectors of even and of odd parity.
    signs: [T::Line; 2],
}

impl<T: Real> Group<T> {
    fn new(mask: usize) -> Self {
        let mut signs = [T::Line::default(); 2];
        for (parity, line) in signs.iter_mut().enumerate() {
            for (lane, sign) in line.as_mut().iter_mut().enumerate() {
                *sign = T::from_f64(if is_odd(lane & mask) ^ (parity == 1) { -1.0 } else { 1.0 });
            }
        }
        Self { mask, terms: vec![], signs }
    }

    /// Signs of the lanes of vector `low` of the low coordinates.
    #[inline(always)]
    pub fn sign(&self, low: usize) -> *const T {
        self.signs[usize::from(is_odd(low & (self.mask >> T::LANE_BITS)))].as_ref().as_ptr()
    }
}

/// A diagonal operation in the coordinates of a space.
#[derive(Clone, Debug)]
pub struct Diagonal<T: Real> {
    /// For each pattern of flips and each vector of low coordinates: cosine lanes, then sine lanes.
    pub low: Vec<T::Line>,
    flips: Vec<Flip>,
    high_static: Vec<Complex64>,
    high: Vec<Term>,
    scalars: Vec<Term>,
    /// Phases that depend on low and high coordinates in more ways than the tables hold.
    pub groups: Vec<Group<T>>,
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
        let low_bits = LOW_BITS.min(space.dimension());
        let low_mask = (1usize << low_bits) - 1;
        let high_size = 1usize << (space.dimension() - low_bits);
        let (mut low, mut high, mut scalars) = (vec![], vec![], vec![]);
        let mut flips: Vec<Flip> = vec![];
        for &(z, angle) in terms {
            let local = space.dual(z);
            let coset = if space.leaves(z) { z as usize } else { 0 };
            let flip = Flip { high: local >> low_bits, coset };
            match (local & low_mask, flip.high) {
                (0, 0) => scalars.push(Term { flip, phase: unit(angle) }),
                (0, _) => high.push(Term { flip, phase: unit(angle) }),
                (mask, _) => {
                    if !flip.is_fixed() && !flips.contains(&flip) {
                        flips.push(flip);
                    }
                    low.push((mask, flip, angle));
                }
            }
        }
        let mut groups: Vec<Group<T>> = vec![];
        if flips.len() > FLIPS {
            flips.clear();
            let (moving, fixed): (Vec<_>, Vec<_>) = low.into_iter().partition(|(_, flip, _)| !flip.is_fixed());
            low = fixed;
            for (mask, flip, angle) in moving {
                let term = Term { flip, phase: unit(angle) };
                let place = groups.iter().position(|group| group.mask == mask).unwrap_or_else(|| {
                    groups.push(Group::new(mask));
                    groups.len() - 1
                });
                groups[place].terms.push(term);
            }
        }
        let (fixed, moving): (Vec<_>, Vec<_>) = high.into_iter().partition(|term: &Term| term.flip.coset == 0);
        let product = |high: usize| fixed.iter().fold(Complex64::new(1.0, 0.0), |p, term| p * term.at(high, 0));
        Self {
            low: low_tables::<T>(&low, &flips, low_bits),
            flips,
            high_static: (0..high_size).map(product).collect(),
            high: moving,
            scalars,
            groups,
            factor,
        }
    }

    /// The factors of the coset of `rep`.
    pub fn prepare(&self, rep: usize, room: &mut CosetFactors<T>) {
        let scalar = self.scalars.iter().fold(self.factor, |p, term| p * term.at(0, rep));
        let lines = self.low.len() >> self.flips.len();
        room.high.clear();
        for (high, fixed) in self.high_static.iter().enumerate() {
            let factor = self.high.iter().fold(fixed * scalar, |p, term| p * term.at(high, rep));
            let bit = |(j, flip): (usize, &Flip)| usize::from(flip.is_odd(high, rep)) << j;
            let pattern: usize = self.flips.iter().enumerate().map(bit).sum();
            room.high.push(HighFactor { re: T::from_f64(factor.re), im: T::from_f64(factor.im), low: pattern * lines });
        }
        room.groups.clear();
        for group in &self.groups {
            for high in 0..self.high_static.len() {
                let phase = group.terms.iter().map(|term| term.at(high, rep)).reduce(|p, q| p * q);
                let phase = phase.unwrap_or(Complex64::new(1.0, 0.0));
                room.groups.push([T::from_f64(phase.re), T::from_f64(phase.im)]);
            }
        }
    }
}

fn low_tables<T: Real>(terms: &[(usize, Flip, f64)], flips: &[Flip], low_bits: u32) -> Vec<T::Line> {
    let mut lines = vec![T::Line::default(); 2 << (flips.len() as u32 + low_bits - T::LANE_BITS)];
    let bits: Vec<usize> =
        terms.iter().map(|(_, flip, _)| flips.iter().position(|own| own == flip).map_or(0, |j| 1 << j)).collect();
    for pattern in 0..1usize << flips.len() {
        for index in 0..1usize << low_bits {
            let angle: f64 = terms
                .iter()
                .zip(&bits)
                .map(
                    |((mask, _, angle), bit)| if is_odd(mask & index) ^ (bit & pattern != 0) { -angle } else { *angle },
                )
                .sum();
            let (place, lane) = ((pattern << low_bits | index) >> T::LANE_BITS, index & ((1 << T::LANE_BITS) - 1));
            let phase = unit(angle);
            lines[2 * place].as_mut()[lane] = T::from_f64(phase.re);
            lines[2 * place + 1].as_mut()[lane] = T::from_f64(phase.im);
        }
    }
    lines
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
