//! Numbers from two blocks, summed in a fixed order.

use super::Work;
use super::lanes::{LANES, Real};

/// Sums of products of two blocks in a fixed order: Σ (re re + im im) and Σ (re im' - im re'), eight partial sums each.
pub struct Dot<'a, T> {
    /// Left block, conjugated.
    pub left: &'a [[T; LANES]],
    /// Right block.
    pub right: &'a [[T; LANES]],
}

impl<T: Real> Work for Dot<'_, T> {
    type Output = (f64, f64);
    #[inline(always)]
    fn run(self) -> (f64, f64) {
        let mut straight = [0.0_f64; LANES];
        let mut crossed = [0.0_f64; LANES];
        let mask = self.left.len().min(self.right.len()) - 1;
        for q in 0..=mask {
            let (left, right) = (&self.left[q & mask], &self.right[q & mask]);
            for l in 0..LANES {
                straight[l] += left[l].to_f64() * right[l].to_f64();
                crossed[l] += left[l].to_f64() * right[l ^ 1].to_f64();
            }
        }
        let even = (crossed[0] + crossed[2]) + (crossed[4] + crossed[6]);
        let odd = (crossed[1] + crossed[3]) + (crossed[5] + crossed[7]);
        let real = ((straight[0] + straight[1]) + (straight[2] + straight[3]))
            + ((straight[4] + straight[5]) + (straight[6] + straight[7]));
        (real, even - odd)
    }
}

/// Σ |left - factor · right|² of two blocks.
pub struct SquaredDistance<'a, T> {
    /// Left block.
    pub left: &'a [[T; LANES]],
    /// Right block.
    pub right: &'a [[T; LANES]],
    /// Complex factor of the right block: (re, im).
    pub factor: (f64, f64),
}

impl<T: Real> Work for SquaredDistance<'_, T> {
    type Output = f64;
    #[inline(always)]
    fn run(self) -> f64 {
        let (re, im) = self.factor;
        let mut sums = [0.0_f64; LANES];
        let mask = self.left.len().min(self.right.len()) - 1;
        for q in 0..=mask {
            let (left, right) = (&self.left[q & mask], &self.right[q & mask]);
            for (l, sum) in sums.iter_mut().enumerate() {
                let signed = if l & 1 == 0 { -im } else { im };
                let turned = re * right[l].to_f64() + signed * right[l ^ 1].to_f64();
                let difference = left[l].to_f64() - turned;
                *sum += difference * difference;
            }
        }
        ((sums[0] + sums[1]) + (sums[2] + sums[3])) + ((sums[4] + sums[5]) + (sums[6] + sums[7]))
    }
}
