//! Inner loops on amplitudes, compiled once for each instruction set and chosen at run time.
//!
//! What is done to amplitudes is written over [`vector::Vector`], about ten operations on eight doubles (or sixteen
//! singles), with one implementation for each instruction set: arrays for every processor, two registers of AVX2, one of
//! AVX-512. [`Isa::run_vectors`] inlines a loop into a function that enables the instruction set. No operation is a fused
//! multiply-add and all have the same number of lanes, so every instruction set gives the same bits.
//!
//! | file | holds |
//! | --- | --- |
//! | [`vector`], `x86_64` | the vectors |
//! | [`bodies`], [`tile`] | what an operation does to the registers of a tile; the loop over tiles |
//! | [`single`] | one rotation alone |
//! | [`carry`] | the passes of a circuit over a state |
//! | [`image`], [`act`], [`recurrence`] | sums of an operator's terms; applications, expectations; the Chebyshev recurrence |
//! | [`copies`] | vectors copied between layouts, real states folded and unfolded |
//! | [`reduce`] | norms, overlaps and distances: plain loops, left to the compiler |
//! | [`peak`], [`pages`] | the arithmetic limit and large pages, for benches |
//! | [`shared`] | one array that several workers write, each its own part |
//!
//! All unsafe code of the crate is in this folder: calls into feature-enabled functions, loads and stores of vectors, and the
//! disjoint access of several workers to one array.

pub mod act;
pub mod addends;
pub mod bodies;
pub mod carry;
pub mod copies;
pub mod image;
pub mod lanes;
pub mod pages;
pub mod peak;
pub mod recurrence;
pub mod reduce;
pub mod shared;
pub mod single;
pub mod tile;
pub mod vector;
#[cfg(target_arch = "x86_64")]
mod x86_64;

use std::sync::OnceLock;

use self::lanes::Real;
use self::vector::Vector;

use crate::error::{Error, Result};

/// A loop that can be compiled for several instruction sets.
pub trait Work {
    /// What the loop returns.
    type Output;
    /// Runs the loop. Implementations must be `#[inline(always)]`, or they are not compiled for the chosen set.
    fn run(self) -> Self::Output;
}

/// A loop over vectors, written once for the vectors of every instruction set.
pub trait VectorWork<T: Real> {
    /// What the loop returns.
    type Output;
    /// Runs the loop. Implementations must be `#[inline(always)]`, or they are not compiled for the chosen set.
    ///
    /// # Safety
    /// The processor has the instruction set of `V`; the work may ask for more.
    unsafe fn run<V: Vector<Element = T>>(self) -> Self::Output;
}

/// An instruction set that this processor has. Values other than [`Isa::BASELINE`] exist only where it was detected.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Isa(Level);

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Level {
    Baseline,
    #[cfg(target_arch = "x86_64")]
    Avx2,
    #[cfg(target_arch = "x86_64")]
    Avx512,
}

impl Isa {
    /// What every processor of this architecture has.
    pub const BASELINE: Self = Self(Level::Baseline);

    /// All instruction sets of this processor, weakest first.
    pub fn available() -> Vec<Self> {
        #[allow(unused_mut)]
        let mut found = vec![Self::BASELINE];
        #[cfg(target_arch = "x86_64")]
        {
            let avx2 = is_x86_feature_detected!("avx2")
                && is_x86_feature_detected!("popcnt")
                && is_x86_feature_detected!("bmi1")
                && is_x86_feature_detected!("bmi2");
            if avx2 {
                found.push(Self(Level::Avx2));
            }
            let wider = is_x86_feature_detected!("avx512f")
                && is_x86_feature_detected!("avx512dq")
                && is_x86_feature_detected!("avx512vl")
                && is_x86_feature_detected!("avx512bw");
            if avx2 && wider {
                found.push(Self(Level::Avx512));
            }
        }
        found
    }

    /// The strongest set, or the one that the environment variable `TRUETURN_ISA` names. Read once.
    ///
    /// # Errors
    /// The variable names a set that does not exist or that this processor lacks.
    pub fn chosen() -> Result<Self> {
        static CHOSEN: OnceLock<Result<Isa>> = OnceLock::new();
        CHOSEN.get_or_init(|| Self::named(std::env::var("TRUETURN_ISA").ok().as_deref())).clone()
    }

    fn named(name: Option<&str>) -> Result<Self> {
        let available = Self::available();
        let Some(name) = name.filter(|name| !name.is_empty()) else {
            return Ok(available[available.len() - 1]);
        };
        available.iter().copied().find(|isa| isa.name() == name).ok_or_else(|| Error::Argument {
            argument: "TRUETURN_ISA",
            message: format!(
                "TRUETURN_ISA: not an instruction set of this processor ({name:?}); set it to one of {}",
                available.iter().map(|isa| isa.name()).collect::<Vec<_>>().join(", ")
            ),
        })
    }

    /// Name as `TRUETURN_ISA` spells it.
    pub fn name(self) -> &'static str {
        match self.0 {
            Level::Baseline => "baseline",
            #[cfg(target_arch = "x86_64")]
            Level::Avx2 => "avx2",
            #[cfg(target_arch = "x86_64")]
            Level::Avx512 => "avx512",
        }
    }

    /// Runs a loop as compiled for this instruction set.
    #[inline]
    pub fn run<W: Work>(self, work: W) -> W::Output {
        match self.0 {
            Level::Baseline => work.run(),
            // SAFETY: a value of this level is only made in `available`, after the features were detected.
            #[cfg(target_arch = "x86_64")]
            Level::Avx2 => unsafe { x86_64::avx2(work) },
            // SAFETY: as above.
            #[cfg(target_arch = "x86_64")]
            Level::Avx512 => unsafe { x86_64::avx512(work) },
        }
    }

    /// Runs a loop over vectors with those of this instruction set.
    ///
    /// # Safety
    /// What the work asks for besides the instruction set.
    #[inline]
    pub unsafe fn run_vectors<T: Real, W: VectorWork<T>>(self, work: W) -> W::Output {
        match self.0 {
            // SAFETY: the portable vectors need no instruction set; the rest is the caller's word.
            Level::Baseline => unsafe { work.run::<T::Portable>() },
            // SAFETY: a value of this level is only made in `available`, after the features were detected.
            #[cfg(target_arch = "x86_64")]
            Level::Avx2 => unsafe { x86_64::avx2_vectors(work) },
            // SAFETY: as above.
            #[cfg(target_arch = "x86_64")]
            Level::Avx512 => unsafe { x86_64::avx512_vectors(work) },
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_unknown_instruction_set_is_refused_with_the_choices() {
        let message = Isa::named(Some("sse9")).unwrap_err().to_string();
        assert!(message.contains("sse9") && message.contains("baseline"), "{message}");
        assert_eq!(Isa::named(Some("baseline")), Ok(Isa::BASELINE));
    }
}
