//! How fast this processor multiplies and adds: the limit that benches compare with.

use super::lanes::Real;
use super::vector::Vector;
use super::{Isa, VectorWork};

/// Products and sums in registers, sixteen chains that do not wait for one another.
struct Chains {
    rounds: usize,
}

const CHAINS: usize = 16;

impl<T: Real> VectorWork<T> for Chains {
    type Output = T;

    /// # Safety
    /// The instruction set is there.
    #[inline(always)]
    unsafe fn run<V: Vector<Element = T>>(self) -> T {
        // SAFETY: by contract; the room holds one vector.
        unsafe {
            let (factor, step) = (V::splat(T::from_f64(0.5)), V::splat(T::from_f64(0.25)));
            // Starts that the compiler cannot tell are equal, or it would carry one chain for all.
            let starts = std::hint::black_box([[T::from_f64(0.25); 16]; CHAINS]);
            let mut chains = starts.map(|start| V::load(start.as_ptr()));
            for _ in 0..self.rounds {
                for chain in &mut chains {
                    *chain = chain.mul(factor).add(step);
                }
            }
            let mut sum = V::splat(T::default());
            for chain in chains {
                sum = sum.add(chain);
            }
            let mut room = [T::default(); 16];
            sum.store(room.as_mut_ptr());
            // All lanes are asked for, or the compiler would leave out registers of the others.
            std::hint::black_box(room)[0]
        }
    }
}

/// Carries out `rounds` rounds of products and sums on one thread and says how many real operations that were.
pub fn arithmetic<T: Real>(isa: Isa, rounds: usize) -> usize {
    // SAFETY: the work asks for nothing but the instruction set.
    std::hint::black_box(unsafe { isa.run_vectors::<T, _>(Chains { rounds }) });
    (2 * CHAINS * rounds) << T::LANE_BITS
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn chains_run_on_every_instruction_set_and_count_their_operations() {
        for isa in Isa::available() {
            assert_eq!(arithmetic::<f64>(isa, 10), 2 * 16 * 10 * 8);
            // SAFETY: as above.
            let ends: f64 = unsafe { isa.run_vectors(Chains { rounds: 60 }) };
            // The fixed point of x/2 + 1/4 is 1/2.
            assert_eq!(ends, 16.0 * 0.5);
        }
    }
}
