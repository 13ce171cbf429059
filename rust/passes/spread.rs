//! Numbers whose signs depend on the high coordinates of a coset and on the coset: their product or sum for all of them.

use num_complex::Complex64;

/// What can be combined in any number, and turned by a sign: phases, which multiply, and coefficients, which add up.
pub trait Combine: Copy {
    /// Combined with nothing.
    const NOTHING: Self;
    /// Both together.
    fn with(self, other: Self) -> Self;
    /// With the other sign of its string.
    fn turned(self) -> Self;
}

impl Combine for Complex64 {
    const NOTHING: Self = Self::new(1.0, 0.0);
    fn with(self, other: Self) -> Self {
        self * other
    }
    fn turned(self) -> Self {
        self.conj()
    }
}

impl Combine for f64 {
    const NOTHING: Self = 0.0;
    fn with(self, other: Self) -> Self {
        self + other
    }
    fn turned(self) -> Self {
        -self
    }
}

fn by_sign<N: Combine>(value: N, masked: usize) -> N {
    if masked.count_ones() & 1 == 1 { value.turned() } else { value }
}

/// A sign by high coordinates and by the coset.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Flip {
    /// Mask over the high coordinates.
    pub high: usize,
    /// Mask over representatives.
    pub coset: usize,
}

impl Flip {
    /// Whether it never flips.
    pub fn is_fixed(self) -> bool {
        self.high == 0 && self.coset == 0
    }

    /// Whether the sign is turned.
    pub fn is_odd(self, high: usize, rep: usize) -> bool {
        ((self.high & high).count_ones() + (self.coset & rep).count_ones()) & 1 == 1
    }
}

/// Numbers combined for every value of the high coordinates. Those that depend on the coset are combined by their high mask
/// first, so that the work for a coset is one step for each number and one for each mask and value.
#[derive(Clone, Debug)]
pub struct Spread<N> {
    fixed: Vec<N>,
    moving: Vec<(usize, Vec<(usize, N)>)>,
}

impl<N: Combine> Spread<N> {
    /// From numbers with their flips, for `size` values.
    pub fn new(size: usize, numbers: impl IntoIterator<Item = (Flip, N)>) -> Self {
        let mut spread = Self { fixed: vec![N::NOTHING; size], moving: vec![] };
        for (flip, number) in numbers {
            if flip.coset == 0 {
                for (high, fixed) in spread.fixed.iter_mut().enumerate() {
                    *fixed = fixed.with(by_sign(number, high & flip.high));
                }
                continue;
            }
            let place = spread.moving.iter().position(|(mask, _)| *mask == flip.high).unwrap_or_else(|| {
                spread.moving.push((flip.high, vec![]));
                spread.moving.len() - 1
            });
            spread.moving[place].1.push((flip.coset, number));
        }
        spread
    }

    /// Calls `take` with the combination for each value of the high coordinates in turn.
    pub fn each(&self, rep: usize, room: &mut Vec<(usize, N)>, mut take: impl FnMut(usize, N)) {
        room.clear();
        for (mask, numbers) in &self.moving {
            let one = |all: N, (coset, number): &(usize, N)| all.with(by_sign(*number, coset & rep));
            let first = by_sign(numbers[0].1, numbers[0].0 & rep);
            room.push((*mask, numbers[1..].iter().fold(first, one)));
        }
        for (high, fixed) in self.fixed.iter().enumerate() {
            take(high, room.iter().fold(*fixed, |all, (mask, number)| all.with(by_sign(*number, mask & high))));
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_spread_combines_all_numbers_for_every_value() {
        let flips = [(0, 0), (1, 0), (3, 5), (2, 4), (0, 1), (3, 2)].map(|(high, coset)| Flip { high, coset });
        let numbers: Vec<(Flip, f64)> = flips.iter().enumerate().map(|(k, flip)| (*flip, f64::from(1 << k))).collect();
        let spread = Spread::new(4, numbers.iter().copied());
        for rep in 0..8 {
            spread.each(rep, &mut vec![], |high, sum| {
                let signed = |(flip, n): &(Flip, f64)| if flip.is_odd(high, rep) { -n } else { *n };
                assert_eq!(sum, numbers.iter().map(signed).sum::<f64>());
            });
        }
    }
}
