//! What an operator does to a state: H|ψ>, expectations, and the Chebyshev recurrence.

use num_complex::{Complex, Complex64};

use crate::action::Action;
use crate::error::{Error, Result};
use crate::evolve::{padded, require_length};
use crate::kernel::act;
use crate::kernel::lanes::Real;
use crate::kernel::recurrence;
use crate::passes::least_qubits;
use crate::team::{Control, Run};
use crate::terms::Terms;

/// Amplitudes of the shortest state that actions work on.
fn least<T: Real>() -> usize {
    1 << least_qubits::<T>()
}

/// Amplitudes times operators of a batch: with cosets of 2^13 amplitudes, 32 MiB of partial sums.
const PARTIAL_SUMS: usize = 1 << 35;
/// Operators in a batch, at most.
const BATCH: usize = 64;

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
    padded(state, least::<T>(), |state| {
        padded(out, least::<T>(), |out| act::apply(action, state, out, threads, control))
    })
}

/// `<state| operator |state>` for each of several operators, in shared traversals of the state.
///
/// # Errors
/// A length that does not fit; a stop on request.
pub fn expectations<T: Real>(
    operators: &[&Terms],
    state: &mut [Complex<T>],
    threads: usize,
    control: &Control,
) -> Result<Vec<f64>> {
    for operator in operators {
        require_length(state.len(), operator.qubits())?;
    }
    // Batches bound the memory of partial sums and prepared operators.
    let batch = (PARTIAL_SUMS >> state.len().ilog2()).clamp(1, BATCH);
    padded(state, least::<T>(), |state| {
        let mut values = Vec::with_capacity(operators.len());
        for operators in operators.chunks(batch) {
            values.extend(act::expectations(&Action::<T>::together(operators), state, threads, control)?);
        }
        Ok(values)
    })
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
    require_lists(coefficients, sums.len())?;
    let least = least::<f64>();
    padded(current, least, |current| {
        padded(previous, least, |previous| {
            let own = sums.first().map_or(least, |sum| sum.len());
            if own >= least {
                return recurrence::chebyshev(action, current, previous, sums, coefficients, threads, control);
            }
            let mut longer = vec![vec![Complex64::default(); least]; sums.len()];
            let mut views: Vec<&mut [Complex64]> = longer.iter_mut().map(Vec::as_mut_slice).collect();
            let run = recurrence::chebyshev(action, current, previous, &mut views, coefficients, threads, control)?;
            sums.iter_mut().zip(&longer).for_each(|(sum, longer)| sum.copy_from_slice(&longer[..own]));
            Ok(run)
        })
    })
}

/// The same for a real start under a real operator, with half the work and without room: `action` is folded.
///
/// Imaginary parts of the start are not looked at. The results end up in `current` and all of `sums` but the last, in this
/// order.
///
/// # Errors
/// As [`chebyshev_sums`].
pub fn real_chebyshev_sums(
    action: &Action<f64>,
    current: &mut [Complex64],
    sums: &mut [&mut [Complex64]],
    coefficients: &[Vec<f64>],
    threads: usize,
    control: &Control,
) -> Result<Run> {
    for length in std::iter::once(current.len()).chain(sums.iter().map(|s| s.len())) {
        require_length(length, action.qubits + 1)?;
    }
    require_lists(coefficients, sums.len())?;
    recurrence::folded_chebyshev(action, current, sums, coefficients, threads, control)
}

fn require_lists(coefficients: &[Vec<f64>], sums: usize) -> Result<()> {
    let terms = coefficients.first().map_or(0, Vec::len);
    if terms == 0 || coefficients.len() != sums || coefficients.iter().any(|list| list.len() != terms) {
        return Err(Error::Internal { message: "lists of Chebyshev coefficients of unequal lengths".into() });
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::pauli::PauliString;

    /// A generator of reproducible numbers: the constants of Knuth's linear congruential MMIX generator.
    fn numbers(seed: u64) -> impl FnMut() -> f64 {
        let mut state = seed;
        move || {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            (state >> 11) as f64 / (1u64 << 53) as f64 - 0.5
        }
    }

    fn operator(qubits: u32, count: usize) -> Terms {
        let mut next = numbers(u64::from(qubits));
        let all = (1u128 << qubits) - 1;
        let strings: Vec<_> = (0..count)
            .map(|i| {
                let (x, z) = ((1e9 * (next() + 0.5)) as u128, (1e9 * (next() + 0.5)) as u128);
                // Repeated x masks, diagonal strings, and both kinds of coefficients.
                let x = if i % 4 == 0 { 0 } else { (x % 7 * 0b1011) & all };
                (PauliString { x, z: z & all }, next())
            })
            .collect();
        Terms::new(Some(qubits), strings).unwrap()
    }

    fn naive(terms: &Terms, state: &[Complex64]) -> Vec<Complex64> {
        let mut out = vec![Complex64::default(); state.len()];
        for (string, coefficient) in terms.iter() {
            for (k, out) in out.iter_mut().enumerate() {
                let from = k ^ string.x as usize;
                let sign = if (from as u128 & string.z).count_ones() & 1 == 1 { -1.0 } else { 1.0 };
                *out += coefficient * sign * Complex64::new(0.0, 1.0).powu(string.y_count()) * state[from];
            }
        }
        out
    }

    fn state(qubits: u32) -> Vec<Complex64> {
        let mut next = numbers(77);
        (0..1 << qubits).map(|_| Complex64::new(next(), next()) / 2.0_f64.powi(qubits as i32).sqrt()).collect()
    }

    fn distance(left: &[Complex64], right: &[Complex64]) -> f64 {
        left.iter().zip(right).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt()
    }

    #[test]
    fn images_and_expectations_are_those_of_the_definition() {
        for qubits in [1, 2, 4, 6, 9, 14, 16] {
            let terms = operator(qubits, 40);
            let action = Action::<f64>::new(&terms, 1.0, 0.25);
            let mut start = state(qubits);
            let mut expected = naive(&terms, &start);
            expected.iter_mut().zip(&start).for_each(|(out, own)| *out += 0.25 * own);
            let limit = 1.2e-16 * (action.rounding() + 10.0 * 40.0);
            for threads in [1, 3] {
                let mut out = vec![Complex64::default(); start.len()];
                let control = Control::default();
                apply(&action, &mut start, &mut out, threads, &control).unwrap();
                assert!(distance(&out, &expected) < limit, "{qubits}: {:e}", distance(&out, &expected));
                let value: Complex64 = start.iter().zip(&expected).map(|(a, b)| a.conj() * b).sum();
                let norm: f64 = start.iter().map(|a| a.norm_sqr()).sum();
                let single = Terms::new(Some(qubits), [(PauliString { x: 1, z: 1 }, 3.0)]).unwrap();
                let turned = naive(&single, &start);
                let own: Complex64 = start.iter().zip(&turned).map(|(a, b)| a.conj() * b).sum();
                let found = expectations(&[&terms, &single], &mut start, threads, &control).unwrap();
                assert!((found[0] + 0.25 * norm - value.re).abs() < 2.0 * limit);
                assert!((found[1] - own.re).abs() < limit);
            }
        }
    }

    #[test]
    fn the_recurrence_is_that_of_the_definition_for_odd_and_even_lengths() {
        for (qubits, terms) in [(2, 5), (8, 4), (15, 2), (15, 7)] {
            let operator = operator(qubits, 12);
            let action = Action::<f64>::new(&operator, 0.4, 0.1);
            let coefficients: Vec<Vec<f64>> =
                (1..3).map(|s| (0..terms).map(|k| 1.0 / f64::from(s + k)).collect()).collect();
            let start = state(qubits);
            let half = |v: &[Complex64]| -> Vec<Complex64> {
                naive(&operator, v).iter().zip(v).map(|(image, own)| 0.5 * (0.4 * image + 0.1 * own)).collect()
            };
            let mut chain = vec![start.clone(), half(&start)];
            for k in 2..terms as usize {
                let next = half(&chain[k - 1]).iter().zip(&chain[k - 2]).map(|(a, b)| 2.0 * a - b).collect();
                chain.push(next);
            }
            let turn = Complex64::new(0.0, -1.0);
            let (mut current, mut previous) = (start.clone(), start.clone());
            let mut found = [start.clone(), start.clone()];
            let mut views: Vec<&mut [Complex64]> = found.iter_mut().map(Vec::as_mut_slice).collect();
            chebyshev_sums(&action, &mut current, &mut previous, &mut views, &coefficients, 2, &Control::default())
                .unwrap();
            for (found, list) in found.iter().zip(&coefficients) {
                let expected: Vec<Complex64> = (0..start.len())
                    .map(|k| list.iter().enumerate().map(|(n, a)| *a * turn.powu(n as u32) * chain[n][k]).sum())
                    .collect();
                // Seven terms, each image rounded as said, errors at most doubled a term.
                assert!(distance(found, &expected) < 128.0 * 1.2e-16 * (action.rounding() + 400.0), "{qubits} {terms}");
            }
        }
    }

    #[test]
    fn folded_sums_are_those_of_the_complex_recurrence() {
        for (qubits, terms) in [(7, 3), (8, 4), (12, 9), (16, 2), (16, 7)] {
            let mixed = operator(qubits, 40);
            let real = mixed.iter().filter(|(string, _)| string.y_count() & 1 == 0);
            // Terms on the top qubit of every kind: alone, beside lanes, with both kinds of masks.
            let top = 1u128 << (qubits - 1);
            let extra =
                [(top, 0), (0, top), (top | 1, 0), (top | 1, top | 1), (top | 32, top | 32), (1, top), (top, 9)];
            let extra = extra.map(|(x, z)| (PauliString { x, z }, 0.3 + x as f64 / (8 * top) as f64));
            let operator = Terms::new(Some(qubits), real.chain(extra)).unwrap();
            let (whole, folded) =
                (Action::<f64>::new(&operator, 0.2, 0.1), Action::<f64>::folded(&operator, 0.2, 0.1).unwrap());
            let coefficients: Vec<Vec<f64>> =
                (1..3).map(|s| (0..terms).map(|k| 1.0 / f64::from(s + k)).collect()).collect();
            let start: Vec<Complex64> = state(qubits).iter().map(|a| a.re.into()).collect();
            let (mut current, mut previous) = (start.clone(), start.clone());
            let mut expected = [start.clone(), start.clone()];
            let mut views: Vec<&mut [Complex64]> = expected.iter_mut().map(Vec::as_mut_slice).collect();
            let control = Control::default();
            chebyshev_sums(&whole, &mut current, &mut previous, &mut views, &coefficients, 1, &control).unwrap();
            let mut bits = None;
            for threads in [1, 3] {
                let (mut current, mut sums) = (start.clone(), [start.clone(), start.clone()]);
                let mut views: Vec<&mut [Complex64]> = sums.iter_mut().map(Vec::as_mut_slice).collect();
                real_chebyshev_sums(&folded, &mut current, &mut views, &coefficients, threads, &control).unwrap();
                let found = [current, sums[0].clone()];
                for (found, expected) in found.iter().zip(&expected) {
                    // Nine terms, each image rounded as said in either way, errors at most doubled a term.
                    let limit = 512.0 * 1.2e-16 * (whole.rounding() + folded.rounding() + 400.0);
                    assert!(distance(found, expected) < limit, "{qubits} {terms}: {:e}", distance(found, expected));
                }
                assert!(bits.as_ref().is_none_or(|bits| *bits == found), "threads change bits");
                bits = Some(found);
            }
        }
        assert!(Action::<f64>::folded(&operator(6, 5), 1.0, 0.0).is_none());
        let odd = Terms::new(Some(9), [(PauliString { x: 1, z: 1 }, 1.0)]).unwrap();
        assert!(Action::<f64>::folded(&odd, 1.0, 0.0).is_none());
    }
}
