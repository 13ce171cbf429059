//! Vectors of AVX2 and AVX-512, and the functions that enable these instruction sets.

use std::arch::x86_64::*;

use super::lanes::Real;
use super::vector::{Lanes, Vector};
use super::{VectorWork, Work};

/// Runs a loop with AVX2.
///
/// # Safety
/// The processor has AVX2, POPCNT, BMI1 and BMI2.
#[target_feature(enable = "avx2,popcnt,bmi1,bmi2")]
pub unsafe fn avx2<W: Work>(work: W) -> W::Output {
    work.run()
}

/// Runs a loop with AVX-512.
///
/// # Safety
/// The processor has AVX-512 F, DQ, VL and BW besides what [`avx2`] asks for.
#[target_feature(enable = "avx512f,avx512dq,avx512vl,avx512bw,avx2,popcnt,bmi1,bmi2")]
pub unsafe fn avx512<W: Work>(work: W) -> W::Output {
    work.run()
}

/// Runs a loop over vectors with AVX2.
///
/// # Safety
/// As [`avx2`], and the contract of the work.
#[target_feature(enable = "avx2,popcnt,bmi1,bmi2")]
pub unsafe fn avx2_vectors<T: Real, W: VectorWork<T>>(work: W) -> W::Output {
    // SAFETY: the contract is handed on.
    unsafe { work.run::<T::Avx2>() }
}

/// Runs a loop over vectors with AVX-512.
///
/// # Safety
/// As [`avx512`], and the contract of the work.
#[target_feature(enable = "avx512f,avx512dq,avx512vl,avx512bw,avx2,popcnt,bmi1,bmi2")]
pub unsafe fn avx512_vectors<T: Real, W: VectorWork<T>>(work: W) -> W::Output {
    // SAFETY: the contract is handed on.
    unsafe { work.run::<T::Avx512>() }
}

#[inline(always)]
fn prefetch_line<T>(line: *const T) {
    // SAFETY: a prefetch never faults; SSE is in every x86-64 processor.
    unsafe { _mm_prefetch::<_MM_HINT_T1>(line.cast()) }
}

/// Arithmetic of one register.
macro_rules! register {
    ($(#[$attribute:meta])* $name:ident, $register:ty, $element:ty, $splat:ident, $add:ident, $sub:ident, $mul:ident) => {
        $(#[$attribute])*
        #[derive(Clone, Copy)]
        pub struct $name($register);

        impl Lanes for $name {
            type Element = $element;
            #[inline(always)]
            unsafe fn splat(value: $element) -> Self {
                // SAFETY: the caller vouches for the instruction set.
                Self(unsafe { $splat(value) })
            }
            #[inline(always)]
            unsafe fn add(self, other: Self) -> Self {
                // SAFETY: as above.
                Self(unsafe { $add(self.0, other.0) })
            }
            #[inline(always)]
            unsafe fn sub(self, other: Self) -> Self {
                // SAFETY: as above.
                Self(unsafe { $sub(self.0, other.0) })
            }
            #[inline(always)]
            unsafe fn mul(self, other: Self) -> Self {
                // SAFETY: as above.
                Self(unsafe { $mul(self.0, other.0) })
            }
        }
    };
}

/// What a vector of one register has in plain.
macro_rules! one_register {
    ($element:ty, $load:ident, $store:ident) => {
        const UNROLLED: bool = true;
        type Part = Self;
        const PARTS: usize = 1;
        #[inline(always)]
        unsafe fn part(self, _number: usize) -> Self {
            self
        }
        #[inline(always)]
        unsafe fn with_part(self, _number: usize, part: Self) -> Self {
            part
        }
        #[inline(always)]
        unsafe fn load(from: *const $element) -> Self {
            // SAFETY: the caller vouches for elements and instruction set.
            Self(unsafe { $load(from) })
        }
        #[inline(always)]
        unsafe fn store(self, to: *mut $element) {
            // SAFETY: as above.
            unsafe { $store(to, self.0) }
        }
        #[inline(always)]
        fn prefetch(line: *const $element) {
            prefetch_line(line);
        }
    };
}

register!(
    /// Eight doubles in one register.
    Double512, __m512d, f64, _mm512_set1_pd, _mm512_add_pd, _mm512_sub_pd, _mm512_mul_pd
);

impl Vector for Double512 {
    one_register!(f64, _mm512_loadu_pd, _mm512_storeu_pd);
    #[inline(always)]
    unsafe fn exchange(self, m: usize) -> Self {
        // SAFETY: the caller vouches for the instruction set.
        unsafe {
            let places = _mm512_xor_si512(_mm512_setr_epi64(0, 1, 2, 3, 4, 5, 6, 7), _mm512_set1_epi64(m as i64));
            Self(_mm512_permutexvar_pd(places, self.0))
        }
    }
    #[inline(always)]
    unsafe fn split(first: Self, second: Self) -> (Self, Self) {
        // SAFETY: as above.
        unsafe {
            let even = _mm512_setr_epi64(0, 2, 4, 6, 8, 10, 12, 14);
            let odd = _mm512_setr_epi64(1, 3, 5, 7, 9, 11, 13, 15);
            (
                Self(_mm512_permutex2var_pd(first.0, even, second.0)),
                Self(_mm512_permutex2var_pd(first.0, odd, second.0)),
            )
        }
    }
    #[inline(always)]
    unsafe fn interleave(re: Self, im: Self) -> (Self, Self) {
        // SAFETY: as above.
        unsafe {
            let low = _mm512_setr_epi64(0, 8, 1, 9, 2, 10, 3, 11);
            let high = _mm512_setr_epi64(4, 12, 5, 13, 6, 14, 7, 15);
            (Self(_mm512_permutex2var_pd(re.0, low, im.0)), Self(_mm512_permutex2var_pd(re.0, high, im.0)))
        }
    }
}

register!(
    /// Sixteen singles in one register.
    Single512, __m512, f32, _mm512_set1_ps, _mm512_add_ps, _mm512_sub_ps, _mm512_mul_ps
);

impl Vector for Single512 {
    one_register!(f32, _mm512_loadu_ps, _mm512_storeu_ps);
    #[inline(always)]
    unsafe fn exchange(self, m: usize) -> Self {
        // SAFETY: the caller vouches for the instruction set.
        unsafe {
            let own = _mm512_setr_epi32(0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15);
            Self(_mm512_permutexvar_ps(_mm512_xor_si512(own, _mm512_set1_epi32(m as i32)), self.0))
        }
    }
    #[inline(always)]
    unsafe fn split(first: Self, second: Self) -> (Self, Self) {
        // SAFETY: as above.
        unsafe {
            let even = _mm512_setr_epi32(0, 2, 4, 6, 8, 10, 12, 14, 16, 18, 20, 22, 24, 26, 28, 30);
            let odd = _mm512_add_epi32(even, _mm512_set1_epi32(1));
            (
                Self(_mm512_permutex2var_ps(first.0, even, second.0)),
                Self(_mm512_permutex2var_ps(first.0, odd, second.0)),
            )
        }
    }
    #[inline(always)]
    unsafe fn interleave(re: Self, im: Self) -> (Self, Self) {
        // SAFETY: as above.
        unsafe {
            let low = _mm512_setr_epi32(0, 16, 1, 17, 2, 18, 3, 19, 4, 20, 5, 21, 6, 22, 7, 23);
            let high = _mm512_add_epi32(low, _mm512_set1_epi32(8));
            (Self(_mm512_permutex2var_ps(re.0, low, im.0)), Self(_mm512_permutex2var_ps(re.0, high, im.0)))
        }
    }
}

register!(
    /// Four doubles.
    Doubles4, __m256d, f64, _mm256_set1_pd, _mm256_add_pd, _mm256_sub_pd, _mm256_mul_pd
);
register!(
    /// Eight singles.
    Singles8, __m256, f32, _mm256_set1_ps, _mm256_add_ps, _mm256_sub_ps, _mm256_mul_ps
);

/// A vector in two AVX2 registers: lanes of the lower half, then of the upper.
macro_rules! two_registers {
    ($name:ident, $part:ident, $element:ty, $lanes:literal, $load:ident, $store:ident) => {
        #[doc = concat!("Twice ", $lanes, " lanes in two registers.")]
        #[derive(Clone, Copy)]
        pub struct $name($part, $part);

        impl Lanes for $name {
            type Element = $element;
            #[inline(always)]
            unsafe fn splat(value: $element) -> Self {
                // SAFETY: the caller vouches for the instruction set.
                unsafe { Self($part::splat(value), $part::splat(value)) }
            }
            #[inline(always)]
            unsafe fn add(self, other: Self) -> Self {
                // SAFETY: as above.
                unsafe { Self(self.0.add(other.0), self.1.add(other.1)) }
            }
            #[inline(always)]
            unsafe fn sub(self, other: Self) -> Self {
                // SAFETY: as above.
                unsafe { Self(self.0.sub(other.0), self.1.sub(other.1)) }
            }
            #[inline(always)]
            unsafe fn mul(self, other: Self) -> Self {
                // SAFETY: as above.
                unsafe { Self(self.0.mul(other.0), self.1.mul(other.1)) }
            }
        }

        impl Vector for $name {
            const UNROLLED: bool = true;
            type Part = $part;
            const PARTS: usize = 2;
            #[inline(always)]
            unsafe fn part(self, number: usize) -> $part {
                if number == 0 { self.0 } else { self.1 }
            }
            #[inline(always)]
            unsafe fn with_part(self, number: usize, part: $part) -> Self {
                if number == 0 { Self(part, self.1) } else { Self(self.0, part) }
            }
            #[inline(always)]
            unsafe fn load(from: *const $element) -> Self {
                // SAFETY: the caller vouches for elements and instruction set.
                unsafe { Self($part($load(from)), $part($load(from.add($lanes)))) }
            }
            #[inline(always)]
            unsafe fn store(self, to: *mut $element) {
                // SAFETY: as above.
                unsafe {
                    $store(to, self.0.0);
                    $store(to.add($lanes), self.1.0);
                }
            }
            #[inline(always)]
            unsafe fn exchange(self, m: usize) -> Self {
                // SAFETY: as above.
                unsafe {
                    if Self::reaches_across(m) {
                        self.exchange_known::<true>(m)
                    } else {
                        self.exchange_known::<false>(m)
                    }
                }
            }
            #[inline(always)]
            unsafe fn exchange_known<const ACROSS: bool>(self, m: usize) -> Self {
                // SAFETY: as above.
                let (low, high) = unsafe { ($part(Self::within(self.0.0, m)), $part(Self::within(self.1.0, m))) };
                if ACROSS { Self(high, low) } else { Self(low, high) }
            }
            #[inline(always)]
            fn reaches_across(m: usize) -> bool {
                m & $lanes != 0
            }
            #[inline(always)]
            unsafe fn split(first: Self, second: Self) -> (Self, Self) {
                // SAFETY: as above.
                unsafe {
                    let low = Self::parts(first.0.0, first.1.0);
                    let high = Self::parts(second.0.0, second.1.0);
                    (Self($part(low.0), $part(high.0)), Self($part(low.1), $part(high.1)))
                }
            }
            #[inline(always)]
            unsafe fn interleave(re: Self, im: Self) -> (Self, Self) {
                // SAFETY: as above.
                unsafe {
                    let low = Self::woven(re.0.0, im.0.0);
                    let high = Self::woven(re.1.0, im.1.0);
                    (Self($part(low.0), $part(low.1)), Self($part(high.0), $part(high.1)))
                }
            }
            #[inline(always)]
            fn prefetch(line: *const $element) {
                prefetch_line(line);
            }
        }
    };
}

two_registers!(Double256, Doubles4, f64, 4, _mm256_loadu_pd, _mm256_storeu_pd);
two_registers!(Single256, Singles8, f32, 8, _mm256_loadu_ps, _mm256_storeu_ps);

impl Double256 {
    /// Lane l of a register takes lane l ^ (m & 3).
    ///
    /// # Safety
    /// The processor has AVX2.
    #[inline(always)]
    unsafe fn within(register: __m256d, m: usize) -> __m256d {
        // SAFETY: as said. A double is two 32-bit lanes.
        unsafe {
            let own = _mm256_setr_epi32(0, 1, 2, 3, 4, 5, 6, 7);
            let places = _mm256_xor_si256(own, _mm256_set1_epi32((2 * (m & 3)) as i32));
            _mm256_castps_pd(_mm256_permutevar8x32_ps(_mm256_castpd_ps(register), places))
        }
    }

    /// Real and imaginary parts of four amplitudes.
    ///
    /// # Safety
    /// The processor has AVX2.
    #[inline(always)]
    unsafe fn parts(first: __m256d, second: __m256d) -> (__m256d, __m256d) {
        // SAFETY: as said. Unpacking gives amplitudes 0, 2, 1, 3.
        unsafe {
            let (re, im) = (_mm256_unpacklo_pd(first, second), _mm256_unpackhi_pd(first, second));
            (_mm256_permute4x64_pd::<0b11_01_10_00>(re), _mm256_permute4x64_pd::<0b11_01_10_00>(im))
        }
    }

    /// The inverse of `parts`.
    ///
    /// # Safety
    /// The processor has AVX2.
    #[inline(always)]
    unsafe fn woven(re: __m256d, im: __m256d) -> (__m256d, __m256d) {
        // SAFETY: as said.
        unsafe {
            let (re, im) = (_mm256_permute4x64_pd::<0b11_01_10_00>(re), _mm256_permute4x64_pd::<0b11_01_10_00>(im));
            (_mm256_unpacklo_pd(re, im), _mm256_unpackhi_pd(re, im))
        }
    }
}

impl Single256 {
    /// Lane l of a register takes lane l ^ (m & 7).
    ///
    /// # Safety
    /// The processor has AVX2.
    #[inline(always)]
    unsafe fn within(register: __m256, m: usize) -> __m256 {
        // SAFETY: as said.
        unsafe {
            let own = _mm256_setr_epi32(0, 1, 2, 3, 4, 5, 6, 7);
            _mm256_permutevar8x32_ps(register, _mm256_xor_si256(own, _mm256_set1_epi32((m & 7) as i32)))
        }
    }

    /// Real and imaginary parts of eight amplitudes.
    ///
    /// # Safety
    /// The processor has AVX2.
    #[inline(always)]
    unsafe fn parts(first: __m256, second: __m256) -> (__m256, __m256) {
        // SAFETY: as said. Shuffling gives pairs of amplitudes 0 1, 4 5, 2 3, 6 7.
        unsafe {
            let re = _mm256_castps_pd(_mm256_shuffle_ps::<0b10_00_10_00>(first, second));
            let im = _mm256_castps_pd(_mm256_shuffle_ps::<0b11_01_11_01>(first, second));
            (
                _mm256_castpd_ps(_mm256_permute4x64_pd::<0b11_01_10_00>(re)),
                _mm256_castpd_ps(_mm256_permute4x64_pd::<0b11_01_10_00>(im)),
            )
        }
    }

    /// The inverse of `parts`.
    ///
    /// # Safety
    /// The processor has AVX2.
    #[inline(always)]
    unsafe fn woven(re: __m256, im: __m256) -> (__m256, __m256) {
        // SAFETY: as said.
        unsafe {
            let re = _mm256_castpd_ps(_mm256_permute4x64_pd::<0b11_01_10_00>(_mm256_castps_pd(re)));
            let im = _mm256_castpd_ps(_mm256_permute4x64_pd::<0b11_01_10_00>(_mm256_castps_pd(im)));
            (_mm256_unpacklo_ps(re, im), _mm256_unpackhi_ps(re, im))
        }
    }
}
