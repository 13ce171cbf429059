//! What an operator does to a state: H|ψ>, expectations, and the Chebyshev recurrence.

use num_complex::{Complex, Complex64};

use crate::action::Action;
use crate::error::{Error, Result};
use crate::evolve::require_length;
use crate::kernel::image;
use crate::kernel::lanes::{GROUP_BITS, Real};
use crate::team::{Control, Run};

/// A state of at least one group: shorter ones are extended by zeros.
fn extended<T: Real>(state: &[Complex<T>]) -> Vec<Complex<T>> {
    let mut longer = state.to_vec();
    longer.resize(state.len().max(1 << GROUP_BITS), Complex::new(T::default(), T::default()));
    longer
}

fn is_short<T>(state: &[Complex<T>]) -> bool {
    state.len() < 1 << GROUP_BITS
}

/// out ← action |state>.
///
/// # Errors
/// Lengths that do not fit; a stop on request, after which `out` is unfinished.
pub fn apply<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    out: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    require_length(state.len(), action.qubits)?;
    require_length(out.len(), action.qubits)?;
    if is_short(state) {
        let (mut longer, mut longer_out) = (extended(state), extended(out));
        let run = image::apply(action, &mut longer, &mut longer_out, threads, control)?;
        out.copy_from_slice(&longer_out[..state.len()]);
        return Ok(run);
    }
    image::apply(action, state, out, threads, control)
}

/// `<state| action |state>`.
///
/// # Errors
/// A length that does not fit.
pub fn expectation<T: Real>(
    action: &Action<T>,
    state: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<f64> {
    require_length(state.len(), action.qubits)?;
    let mut longer;
    let state = if is_short(state) {
        longer = extended(state);
        &mut longer[..]
    } else {
        state
    };
    image::expectation(action, state, threads, control)
}

/// Sums Σ_k a_k (-i)^k T_k(H') |start> for several lists of coefficients at once, where `action` is 2 H'.
///
/// `current` holds the start and is used up, `previous` is room; `sums[i]` receives the sum with `coefficients[i]`. All
/// lists have the same length, at least 1.
///
/// # Errors
/// Lengths that do not fit; a stop on request.
pub fn chebyshev_sums(
    action: &Action<f64>,
    current: &mut [Complex64],
    previous: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    for length in [current.len(), previous.len()].into_iter().chain(sums.iter().map(|s| s.len())) {
        require_length(length, action.qubits)?;
    }
    let terms = coefficients.first().map_or(0, Vec::len);
    if terms == 0 || coefficients.len() != sums.len() || coefficients.iter().any(|list| list.len() != terms) {
        return Err(Error::Internal { message: "lists of Chebyshev coefficients of unequal lengths".into() });
    }
    if is_short(current) {
        let (mut current, mut previous) = (extended(current), extended(previous));
        let mut longer: Vec<Vec<Complex64>> = sums.iter().map(|sum| extended(sum)).collect();
        let mut views: Vec<&mut [Complex64]> = longer.iter_mut().map(Vec::as_mut_slice).collect();
        let run = image::chebyshev(action, &mut current, &mut previous, &mut views, coefficients, threads, control)?;
        sums.iter_mut().zip(&longer).for_each(|(sum, longer)| sum.copy_from_slice(&longer[..sum.len()]));
        return Ok(run);
    }
    image::chebyshev(action, current, previous, sums, coefficients, threads, control)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_short_state_is_extended_and_cut_back() {
        let state = [Complex64::new(1.0, 0.0), Complex64::new(0.0, 2.0)];
        assert_eq!(extended(&state).len(), 4);
        assert!(is_short(&state));
    }
}
