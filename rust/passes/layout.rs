//! Where the vectors of a coset lie.
//!
//! A coset is a translate of a space over GF(2), and so is a tile of it. Offsets therefore add up by exclusive or: vector t of a
//! tile lies at `origin ^ tile ^ register t`, whether the coset is a contiguous block, scattered over the state, or copied to
//! a buffer. Worked example on three qubits, vectors of one amplitude, cosets of the span of 0b001 and 0b100, tiles of two: tile
//! 1 of the coset of 0b010 starts at 0b010 ^ 0b100, and its second vector lies at 0b010 ^ 0b100 ^ 0b001 = 0b111.

use super::space::Space;
use super::tiles::TILE;
use crate::kernel::lanes::Real;

/// Offsets of tiles and of vectors in a tile, in reals.
#[derive(Clone, Debug)]
pub struct Layout {
    /// By tile, in the order in which they are visited.
    pub tiles: Vec<usize>,
    /// By register.
    pub registers: [usize; TILE],
}

impl Layout {
    /// Tiles with these first vectors and this comb, where `offset` tells where a vector of the coset lies.
    pub fn new(bases: &[usize], comb: &[usize; TILE], offset: impl Fn(usize) -> usize) -> Self {
        Self { tiles: bases.iter().map(|base| offset(*base)).collect(), registers: comb.map(&offset) }
    }

    /// A coset of `space` in the state, tile after tile of neighbouring coordinates.
    pub fn sequence<T: Real>(space: &Space) -> Self {
        let vectors = 1usize << (space.dimension() - T::LANE_BITS);
        let bases: Vec<usize> = (0..vectors).step_by(TILE).collect();
        Self::new(&bases, &std::array::from_fn(|t| t), |vector| scattered::<T>(space, vector))
    }
}

/// Where a vector of a coset lies in the state, relative to the representative, in reals.
pub fn scattered<T: Real>(space: &Space, vector: usize) -> usize {
    2 * space.vector(vector << T::LANE_BITS) as usize
}

/// Where a vector lies in a buffer of the coset, in reals.
pub fn packed<T: Real>(vector: usize) -> usize {
    vector << (T::LANE_BITS + 1)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::passes::space::Span;

    #[test]
    fn a_sequence_covers_the_coset_once() {
        let mut span = Span::of_low_bits(5);
        assert!(span.admit(1 << 9 | 1 << 7, 8) && span.admit(1 << 8, 8));
        let space = Space::new(span.filled(8));
        let layout = Layout::sequence::<f64>(&space);
        let with_registers = |tile: &usize| layout.registers.map(|register| tile ^ register);
        let mut starts: Vec<usize> = layout.tiles.iter().flat_map(with_registers).collect();
        starts.sort_unstable();
        let mut expected: Vec<usize> = (0..1usize << 8).map(|c| 2 * space.vector(c) as usize).collect();
        expected.sort_unstable();
        let expected: Vec<usize> = expected.into_iter().step_by(8).collect();
        assert_eq!(starts, expected);
    }
}
