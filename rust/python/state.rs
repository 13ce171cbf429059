//! Functions on state vectors that live in NumPy arrays.

use numpy::{Complex64, PyArray1, PyReadwriteArray1};
use pyo3::prelude::*;

use super::arrays::{Amplitudes, borrow, borrow_double, slice};
use super::error::to_python;
use super::gateway::{Spoils, run};
use super::rotations::PyRotations;
use super::terms::PyTerms;
use crate::action::Action;
use crate::apply;
use crate::evolve::evolve as evolve_state;
use crate::kernel::Isa;
use crate::kernel::lanes::Real;
use crate::sums;
use crate::terms::Terms;

/// Evaluates an expression for either precision.
macro_rules! either {
    ($py:expr, $amplitudes:expr, $name:ident => $body:expr) => {
        match $amplitudes {
            Amplitudes::Double(array) => {
                let $name = slice($py, array)?;
                $body
            }
            Amplitudes::Single(array) => {
                let $name = slice($py, array)?;
                $body
            }
        }
    };
}

/// Applies a circuit in place. Returns (passes, workers).
#[pyfunction]
pub fn evolve(
    py: Python<'_>,
    state: &Bound<'_, PyAny>,
    rotations: &PyRotations,
    threads: usize,
    progress: Option<Py<PyAny>>,
) -> PyResult<(u64, usize)> {
    let mut amplitudes = borrow(state)?;
    let circuit = &rotations.rotations;
    let done = either!(py, &mut amplitudes, state => {
        let weight = (state.len() as u64).saturating_mul(circuit.count().saturating_add(1));
        run(py, weight, Spoils::State, progress.as_ref(), |control| evolve_state(state, circuit, threads, control))?
    });
    Ok((done.passes, done.workers))
}

/// Sets all amplitudes to zero, each worker its own share first.
#[pyfunction]
pub fn clear(py: Python<'_>, state: &Bound<'_, PyAny>, threads: usize) -> PyResult<()> {
    let mut amplitudes = borrow(state)?;
    either!(py, &mut amplitudes, state => {
        py.detach(|| sums::clear(state, threads)).map_err(|error| to_python(py, error))
    })
}

/// out ← operator |state>, both complex128.
#[pyfunction]
pub fn apply_terms(
    py: Python<'_>,
    terms: &PyTerms,
    state: &Bound<'_, PyAny>,
    out: &Bound<'_, PyAny>,
    threads: usize,
) -> PyResult<()> {
    let (mut state, mut out) = (borrow_double(state)?, borrow_double(out)?);
    let (state, out) = (slice(py, &mut state)?, slice(py, &mut out)?);
    let weight = (state.len() * terms.terms.strings().len().max(1)) as u64;
    run(py, weight, Spoils::Nothing, None, |control| {
        apply::apply(&Action::new(&terms.terms, 1.0, 0.0), state, out, threads, control).map(drop)
    })
}

/// `<state| operator |state>` for each of several operators, in shared traversals.
#[pyfunction]
pub fn expectations(
    py: Python<'_>,
    operators: Vec<PyRef<'_, PyTerms>>,
    state: &Bound<'_, PyAny>,
    threads: usize,
) -> PyResult<Vec<f64>> {
    let operators: Vec<&Terms> = operators.iter().map(|own| &*own.terms).collect();
    let strings = operators.iter().map(|terms| terms.strings().len()).sum::<usize>();
    let mut amplitudes = borrow(state)?;
    either!(py, &mut amplitudes, state => {
        let weight = (state.len() as u64).saturating_mul(strings.max(1) as u64);
        run(py, weight, Spoils::Nothing, None, |control| apply::expectations(&operators, state, threads, control))
    })
}

/// Bound on the rounding of one application of `scale · operator + shift` to a unit vector, folded or not, in units of the
/// roundoff.
#[pyfunction]
pub fn application_rounding(terms: &PyTerms, scale: f64, shift: f64) -> f64 {
    let whole = Action::<f64>::new(&terms.terms, scale, shift).rounding();
    Action::<f64>::folded(&terms.terms, scale, shift).map_or(whole, |folded| whole.max(folded.rounding()))
}

/// Bound on the rounding of one image of a unit vector under an operator in [`expectations`], in units of the roundoff.
#[pyfunction]
pub fn image_rounding(terms: &PyTerms) -> f64 {
    Action::<f64>::shared_rounding(&terms.terms)
}

/// Chebyshev sums from `current` (used up) with room `previous` into `sums`; see [`apply::chebyshev_sums`].
#[pyfunction]
#[allow(clippy::too_many_arguments)]
pub fn chebyshev_sums(
    py: Python<'_>,
    terms: &PyTerms,
    scale: f64,
    shift: f64,
    current: &Bound<'_, PyAny>,
    previous: &Bound<'_, PyAny>,
    sums: Vec<Bound<'_, PyAny>>,
    coefficients: Vec<Vec<f64>>,
    threads: usize,
    progress: Option<Py<PyAny>>,
) -> PyResult<()> {
    let (mut current, mut previous) = (borrow_double(current)?, borrow_double(previous)?);
    let (current, previous) = (slice(py, &mut current)?, slice(py, &mut previous)?);
    let mut arrays: Vec<PyReadwriteArray1<Complex64>> = sums.iter().map(borrow_double).collect::<PyResult<_>>()?;
    let mut views = arrays.iter_mut().map(|array| slice(py, array)).collect::<PyResult<Vec<_>>>()?;
    let count = coefficients.first().map_or(0, Vec::len);
    let weight = (current.len() as u64).saturating_mul((count * terms.terms.strings().len().max(1)) as u64);
    run(py, weight, Spoils::Nothing, progress.as_ref(), |control| {
        let action = Action::new(&terms.terms, scale, shift);
        apply::chebyshev_sums(&action, current, previous, &mut views, &coefficients, threads, control).map(drop)
    })
}

/// Chebyshev sums from a real `current` under a real operator, into `current` and all of `sums` but the last; see
/// [`apply::real_chebyshev_sums`]. Returns whether they were made: not where the start or the operator is not real, or the
/// state too short; then nothing has changed.
#[pyfunction]
#[allow(clippy::too_many_arguments)]
pub fn real_chebyshev_sums(
    py: Python<'_>,
    terms: &PyTerms,
    scale: f64,
    shift: f64,
    current: &Bound<'_, PyAny>,
    sums: Vec<Bound<'_, PyAny>>,
    coefficients: Vec<Vec<f64>>,
    threads: usize,
    progress: Option<Py<PyAny>>,
) -> PyResult<bool> {
    let mut current = borrow_double(current)?;
    let current = slice(py, &mut current)?;
    let mut arrays: Vec<PyReadwriteArray1<Complex64>> = sums.iter().map(borrow_double).collect::<PyResult<_>>()?;
    let mut views = arrays.iter_mut().map(|array| slice(py, array)).collect::<PyResult<Vec<_>>>()?;
    let count = coefficients.first().map_or(0, Vec::len);
    let weight = (current.len() as u64).saturating_mul((count * terms.terms.strings().len().max(1)) as u64);
    run(py, weight, Spoils::Nothing, progress.as_ref(), |control| {
        if current.iter().any(|amplitude| amplitude.im != 0.0) {
            return Ok(false);
        }
        let Some(action) = Action::folded(&terms.terms, scale, shift) else { return Ok(false) };
        apply::real_chebyshev_sums(&action, current, &mut views, &coefficients, threads, control).map(|_| true)
    })
}

/// `<left|right>`, both of one type.
#[pyfunction]
pub fn overlap(
    py: Python<'_>,
    left: &Bound<'_, PyAny>,
    right: &Bound<'_, PyAny>,
    threads: usize,
) -> PyResult<Complex64> {
    both(py, left, right, Overlap { threads })
}

/// ‖left - factor · right‖, both of one type.
#[pyfunction]
pub fn distance(
    py: Python<'_>,
    left: &Bound<'_, PyAny>,
    right: &Bound<'_, PyAny>,
    factor: Complex64,
    threads: usize,
) -> PyResult<f64> {
    both(py, left, right, Distance { factor, threads })
}

/// A figure of two states of one precision.
trait Figure {
    type Value: Send;
    fn of<T: Real>(
        &self,
        left: &[num_complex::Complex<T>],
        right: &[num_complex::Complex<T>],
    ) -> crate::error::Result<Self::Value>;
}

struct Overlap {
    threads: usize,
}

impl Figure for Overlap {
    type Value = Complex64;
    fn of<T: Real>(
        &self,
        left: &[num_complex::Complex<T>],
        right: &[num_complex::Complex<T>],
    ) -> crate::error::Result<Complex64> {
        sums::overlap(left, right, self.threads)
    }
}

struct Distance {
    factor: Complex64,
    threads: usize,
}

impl Figure for Distance {
    type Value = f64;
    fn of<T: Real>(
        &self,
        left: &[num_complex::Complex<T>],
        right: &[num_complex::Complex<T>],
    ) -> crate::error::Result<f64> {
        sums::distance(left, right, self.factor, self.threads)
    }
}

fn both<F: Figure + Sync>(
    py: Python<'_>,
    left: &Bound<'_, PyAny>,
    right: &Bound<'_, PyAny>,
    figure: F,
) -> PyResult<F::Value> {
    if left.is(right) {
        // One array cannot be borrowed twice; a state beside itself is still a fair question.
        let copy = left.call_method0("copy")?;
        return both(py, left, &copy, figure);
    }
    let outcome = match (borrow(left)?, borrow(right)?) {
        (Amplitudes::Double(mut left), Amplitudes::Double(mut right)) => {
            let (left, right) = (slice(py, &mut left)?, slice(py, &mut right)?);
            py.detach(|| figure.of(left, right))
        }
        (Amplitudes::Single(mut left), Amplitudes::Single(mut right)) => {
            let (left, right) = (slice(py, &mut left)?, slice(py, &mut right)?);
            py.detach(|| figure.of(left, right))
        }
        _ => {
            let expected = "two states of one precision";
            Err(crate::error::Error::StateType { found: "complex128 beside complex64".into(), expected })
        }
    };
    outcome.map_err(|error| to_python(py, error))
}

/// The squared norm of each block of 2^10 amplitudes.
#[pyfunction]
pub fn squared_norms<'py>(
    py: Python<'py>,
    state: &Bound<'py, PyAny>,
    threads: usize,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let mut amplitudes = borrow(state)?;
    let norms = either!(py, &mut amplitudes, state => py.detach(|| sums::squared_norms(state, threads)));
    norms.map(|norms| PyArray1::from_vec(py, norms)).map_err(|error| to_python(py, error))
}

/// Adds in pairs, then pairs of pairs.
#[pyfunction]
pub fn pairwise_sum(values: Vec<f64>) -> f64 {
    sums::pairwise(&values)
}

/// Names of the instruction sets of this processor, and of the one in use.
#[pyfunction]
pub fn instruction_sets(py: Python<'_>) -> PyResult<(Vec<&'static str>, &'static str)> {
    let chosen = Isa::chosen().map_err(|error| to_python(py, error))?;
    Ok((Isa::available().into_iter().map(Isa::name).collect(), chosen.name()))
}
