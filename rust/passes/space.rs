//! Subspaces over GF(2), and the cosets that rotations act in.

/// A subspace in reduced echelon form, pivots being highest bits.
#[derive(Clone, Debug)]
pub struct Span {
    basis: Vec<u64>,
}

impl Span {
    /// The span of the lowest unit vectors.
    pub fn of_low_bits(bits: u32) -> Self {
        Self { basis: (0..bits).map(|bit| 1 << bit).collect() }
    }

    /// Number of independent vectors.
    pub fn dimension(&self) -> u32 {
        self.basis.len() as u32
    }

    fn reduce(&self, vector: u64) -> u64 {
        self.basis.iter().fold(vector, |rest, v| if rest >> v.ilog2() & 1 == 1 { rest ^ v } else { rest })
    }

    /// Whether a vector lies in the span.
    pub fn contains(&self, vector: u64) -> bool {
        self.reduce(vector) == 0
    }

    /// Makes the span contain `vector` if its dimension then stays within `limit`; says whether it does.
    pub fn admit(&mut self, vector: u64, limit: u32) -> bool {
        let rest = self.reduce(vector);
        if rest == 0 {
            return true;
        }
        if self.dimension() >= limit {
            return false;
        }
        for v in &mut self.basis {
            if *v >> rest.ilog2() & 1 == 1 {
                *v ^= rest;
            }
        }
        self.basis.push(rest);
        true
    }

    /// Fills up with the lowest unit vectors that are missing, and sorts by pivot.
    pub fn filled(mut self, dimension: u32) -> Vec<u64> {
        let mut bit = 0;
        while self.dimension() < dimension {
            self.admit(1 << bit, dimension);
            bit += 1;
        }
        self.basis.sort_by_key(|v| v.ilog2());
        self.basis
    }
}

/// A basis, sorted by pivot and reduced, seen as coordinates inside its cosets.
#[derive(Clone, Debug)]
pub struct Space {
    basis: Vec<u64>,
    pivots: u64,
}

impl Space {
    /// From a reduced basis as [`Span::filled`] gives it.
    pub fn new(basis: Vec<u64>) -> Self {
        let pivots = basis.iter().fold(0u64, |mask, v| mask | 1 << v.ilog2());
        Self { basis, pivots }
    }

    /// Number of coordinates.
    pub fn dimension(&self) -> u32 {
        self.basis.len() as u32
    }

    /// The highest pivot of a space that is not trivial.
    pub fn highest(&self) -> u32 {
        self.pivots.ilog2()
    }

    /// Whether the basis is the lowest unit vectors, so that cosets are contiguous blocks.
    pub fn is_contiguous(&self) -> bool {
        self.pivots == (1u64 << self.dimension()) - 1
    }

    /// Coordinates of a vector of the space: its bits at the pivots.
    pub fn coordinates(&self, vector: u64) -> usize {
        let bit = |(i, v): (usize, &u64)| (vector >> v.ilog2() & 1) << i;
        self.basis.iter().enumerate().map(bit).sum::<u64>() as usize
    }

    /// The mask by whose parity with the coordinates the parity of `index & mask` changes inside a coset.
    pub fn dual(&self, mask: u64) -> usize {
        let bit = |(i, v): (usize, &u64)| u64::from((v & mask).count_ones() & 1) << i;
        self.basis.iter().enumerate().map(bit).sum::<u64>() as usize
    }

    /// The vector with these coordinates.
    pub fn vector(&self, coordinates: usize) -> u64 {
        let chosen = |(i, v): (usize, &u64)| if coordinates >> i & 1 == 1 { *v } else { 0 };
        self.basis.iter().enumerate().map(chosen).fold(0, |sum, v| sum ^ v)
    }

    /// The representative of coset `number`: its bits laid out on the positions that are no pivots.
    pub fn representative(&self, number: usize) -> usize {
        let (mut rep, mut rest, mut position) = (0u64, number as u64, 0u32);
        while rest != 0 {
            if self.pivots >> position & 1 == 0 {
                rep |= (rest & 1) << position;
                rest >>= 1;
            }
            position += 1;
        }
        rep as usize
    }

    /// Positions below `bits` that are no pivots, as a mask.
    pub fn complement(&self, bits: u32) -> usize {
        (!self.pivots & ((1u64 << bits) - 1)) as usize
    }

    /// Whether the representative of a coset may have a bit of `mask`.
    pub fn leaves(&self, mask: u64) -> bool {
        mask & !self.pivots != 0
    }
}

/// All numbers whose bits lie in `mask`, ascending.
pub fn subsets(mask: usize) -> Vec<usize> {
    let mut found = Vec::with_capacity(1 << mask.count_ones());
    let mut next = 0usize;
    loop {
        found.push(next);
        next = next.wrapping_sub(mask) & mask;
        if next == 0 {
            return found;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_span_is_reduced_and_refuses_to_grow_past_its_limit() {
        let mut span = Span::of_low_bits(1);
        assert!(span.admit(0b110, 3) && span.admit(0b100, 3));
        assert!(span.admit(0b010, 3), "already inside");
        assert!(!span.admit(0b1000, 3));
        assert_eq!(span.filled(3), [0b001, 0b010, 0b100]);
    }

    #[test]
    fn cosets_cover_the_index_space_once() {
        let mut span = Span::of_low_bits(2);
        assert!(span.admit(0b1100000, 4) && span.admit(0b0101001, 4));
        let space = Space::new(span.filled(5));
        let mut seen = vec![0; 1 << 8];
        for number in 0..1 << 3 {
            (0..1 << 5).for_each(|k| seen[space.representative(number) ^ space.vector(k) as usize] += 1);
        }
        assert!(seen.iter().all(|&count| count == 1));
        let vector = space.vector(0b10110);
        assert_eq!(space.coordinates(vector), 0b10110);
        let mask = 0b1011011;
        assert_eq!((vector & mask).count_ones() & 1, (space.dual(mask) & 0b10110).count_ones() & 1);
    }

    #[test]
    fn subsets_are_all_and_ascending() {
        assert_eq!(subsets(0b101), [0, 1, 4, 5]);
        assert_eq!(subsets(0), [0]);
    }
}
