//! An operator sorted for being applied to a state block by block; [`crate::apply`] does it.
//!
//! The output is made block by block in first-level cache. Terms are sorted by the high bits of their x mask: all of one
//! sort read the same source block. Inside, terms join as far as one pass over the block can carry them:
//!
//! - terms with the same low masks share one coefficient for the block, the sum of theirs with the signs that the high
//!   bits give;
//! - strings with the same low x mask whose signs depend on one parity of the block index at most (XX and YY on a bond) add
//!   up to one string with weights for either parity;
//! - diagonal strings on low bits alone add up to a table, made once.
//!
//! So one traversal of the output serves all terms, and the recurrence T_{k+1} = 2 H' T_k - T_{k-1} with its accumulations
//! is folded into the same traversal. Joined terms are summed in groups of eight and the groups then added, so that a term
//! passes through at most 8 + (joined terms / 8) additions; [`Action::rounding`] counts them for the certificate.

use crate::kernel::lanes::{Factor, GROUP_BITS, LANES, LaneString, Real};
use crate::terms::Terms;

/// Low bits of a block: the sum, its part and the source fit in first-level cache together.
pub const BLOCK_BITS: u32 = 9;
/// Terms added up before they join the sum.
pub const PART: usize = 8;

/// Strings with the same low masks.
struct Share<T> {
    /// Their low part with factor 1 or i.
    unit: LaneString<T>,
    /// High z mask and signed coefficient of each.
    terms: Vec<(usize, f64)>,
}

impl<T> Share<T> {
    /// Σ ± coefficient, the signs being those of the high bits of the source block.
    fn coefficient(&self, source: usize) -> f64 {
        let signed = |(z, c): &(usize, f64)| if (source & z).count_ones() & 1 == 1 { -c } else { *c };
        self.terms.iter().map(signed).sum()
    }
}

/// Strings that one pass over a block carries: they move lanes and groups alike, and at most one parity of the group index
/// other than none gives their signs.
pub struct Item<T> {
    shares: Vec<Share<T>>,
}

impl<T: Real> Item<T> {
    fn admits(&self, unit: &LaneString<T>) -> bool {
        let first = &self.shares[0].unit;
        let parities = self.shares.iter().map(|share| share.unit.z).chain([unit.z]).filter(|&z| z != 0);
        let mut parities = parities.collect::<Vec<_>>();
        parities.dedup();
        first.m == unit.m && first.x == unit.x && parities.len() <= 1
    }

    /// The sum of the shares as one string, for a source block.
    pub fn joined(&self, source: usize) -> LaneString<T> {
        let scaled = |share: &Share<T>| share.unit.scaled(T::from_f64(share.coefficient(source)));
        let mut shares = self.shares.iter();
        let first = shares.next().map(scaled);
        shares.map(scaled).fold(first, |sum, next| sum.map(|sum| sum.plus(&next))).unwrap_or_else(LaneString::nothing)
    }
}

/// Items that read the same source block.
pub struct Source<T> {
    /// High bits of the x masks.
    pub x: usize,
    /// What reads it.
    pub items: Vec<Item<T>>,
}

/// An operator `scale · H + shift`, ready to be applied.
pub struct Action<T> {
    /// Qubits of the operator.
    pub qubits: u32,
    /// All strings but those of `diagonal`.
    pub sources: Vec<Source<T>>,
    /// Diagonal strings on low bits alone.
    pub diagonal: Option<Diagonal<T>>,
}

/// Diagonal strings on low bits alone, added up.
pub struct Diagonal<T> {
    strings: usize,
    size: f64,
    /// Their sum for each lane of a block.
    pub table: Vec<[T; LANES]>,
}

impl<T: Real> Action<T> {
    /// Prepares `scale · terms + shift`.
    pub fn new(terms: &Terms, scale: f64, shift: f64) -> Self {
        let mut action = Self { qubits: terms.qubits(), sources: vec![], diagonal: None };
        let low = (1u64 << BLOCK_BITS) - 1;
        let masks = terms.strings().iter().map(|s| (s.x as u64, s.z as u64, s.y_count()));
        let scaled = masks.zip(terms.coefficients().iter().map(|coefficient| scale * coefficient));
        let all = scaled.chain((shift != 0.0).then_some(((0, 0, 0), shift)));
        let (diagonal, others): (Vec<_>, Vec<_>) = all.partition(|((x, z, _), _)| *x == 0 && z & !low == 0);
        for ((x, z, y_count), coefficient) in others {
            action.add(x, z, y_count, coefficient);
        }
        if !diagonal.is_empty() {
            action.diagonal =
                Some(action.tabulated(&diagonal.iter().map(|((_, z, _), c)| (*z, *c)).collect::<Vec<_>>()));
        }
        action
    }

    fn add(&mut self, x: u64, z: u64, y_count: u32, coefficient: f64) {
        let low = (1u64 << BLOCK_BITS) - 1;
        let (signed, unit) = match Factor::Real(coefficient).times_i_power(y_count) {
            Factor::Real(value) => (value, Factor::Real(1.0)),
            Factor::Imaginary(value) => (value, Factor::Imaginary(1.0)),
        };
        let unit = LaneString::new(x & low, z & low, unit);
        let source = (x >> BLOCK_BITS) as usize;
        let place = self.sources.iter().position(|s| s.x == source).unwrap_or_else(|| {
            self.sources.push(Source { x: source, items: vec![] });
            self.sources.len() - 1
        });
        let term = ((z >> BLOCK_BITS) as usize, signed);
        let items = &mut self.sources[place].items;
        match items.iter_mut().find(|item| item.admits(&unit)) {
            None => items.push(Item { shares: vec![Share { unit, terms: vec![term] }] }),
            Some(item) => match item.shares.iter_mut().find(|share| share.unit == unit) {
                Some(share) => share.terms.push(term),
                None => item.shares.push(Share { unit, terms: vec![term] }),
            },
        }
    }

    fn tabulated(&self, strings: &[(u64, f64)]) -> Diagonal<T> {
        let groups = 1usize << (self.qubits.clamp(GROUP_BITS, BLOCK_BITS) - GROUP_BITS);
        let value = |index: u64| -> f64 {
            strings.iter().map(|(z, c)| if (index & z).count_ones() & 1 == 1 { -c } else { *c }).sum()
        };
        let lanes = |q: usize| std::array::from_fn(|l| T::from_f64(value((q * LANES / 2 + l / 2) as u64)));
        Diagonal {
            strings: strings.len(),
            size: strings.iter().map(|(_, c)| c.abs()).sum(),
            table: (0..groups).map(lanes).collect(),
        }
    }

    /// Bound on the 2-norm of the rounding error of one application to a unit vector, in units of the roundoff.
    ///
    /// Each term is rounded once when scaled, once for each sum of coefficients or weights it enters, once when multiplied,
    /// and once for each addition of amplitudes that it passes through; the error is at most the sum of |coefficient| times
    /// that number, since a string only permutes amplitudes and changes their phase by a power of i.
    pub fn rounding(&self) -> f64 {
        let items: Vec<&Item<T>> = self.sources.iter().flat_map(|source| &source.items).collect();
        let parts = items.len().div_ceil(PART) + 1;
        let weigh = |(place, item): (usize, &&Item<T>)| {
            let additions = (PART - place % PART) + (parts - place / PART);
            let one = |share: &Share<T>| {
                let size: f64 = share.terms.iter().map(|(_, coefficient)| coefficient.abs()).sum();
                size * (2 + share.terms.len() + item.shares.len() + additions) as f64
            };
            item.shares.iter().map(one).sum::<f64>()
        };
        let diagonal = self.diagonal.as_ref().map_or(0.0, |d| d.size * (2 + d.strings + parts) as f64);
        items.iter().enumerate().map(weigh).sum::<f64>() + diagonal
    }
}
