//! The same loops compiled for wider vectors.

use super::Work;

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
/// The processor has AVX-512 F and DQ besides what [`avx2`] asks for.
#[target_feature(enable = "avx512f,avx512dq,avx2,popcnt,bmi1,bmi2")]
pub unsafe fn avx512<W: Work>(work: W) -> W::Output {
    work.run()
}
