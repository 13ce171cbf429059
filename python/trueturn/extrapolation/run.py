"""Runs a formula at a few step counts and combines the observables."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction

import numpy as np
import numpy.typing as npt

from trueturn import _memory, _threads
from trueturn._observables import named_operators
from trueturn.audit.candidate import Candidate
from trueturn.audit.measure import judge
from trueturn.audit.truth import Progress, positive_times, reference_for
from trueturn.errors import ArgumentError, AuditError, FormulaError, ToleranceError
from trueturn.extrapolation.result import Extrapolation
from trueturn.extrapolation.weights import checked_steps, combined_order, multiproduct_weights
from trueturn.formulas import ANGLE_ROUNDINGS, Formula
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Reference
from trueturn.reference.certificate import UNIT, expectation_rounding, expectation_shift, norm_bound
from trueturn.state import State, require_same_qubits

__all__ = ["extrapolate"]

Array = npt.NDArray[np.float64]


def extrapolate(
    operator: Operator,
    state: State,
    times: float | Iterable[float],
    formula: str | Formula = "strang",
    rule: str | Partition = "commuting",
    steps: Iterable[int] = (1, 2, 3),
    observables: Mapping[str, Operator] | None = None,
    tolerance: float | None = None,
    *,
    reference_tolerance: float | None = None,
    threads: int | None = None,
    progress: Progress | None = None,
) -> Extrapolation:
    """Extrapolate observables from a few step counts to infinitely many.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian; ħ = 1.
    state : State
        Start; not written.
    times : float or iterable of float
        Positive, in inverse units of the coefficients. Each time has circuits of its own.
    formula : str or Formula
        Symmetric.
    rule : str or Partition
        How the Hamiltonian is split into parts, as for `Candidate`.
    steps : iterable of int
        At least two distinct step counts k_1 … k_m; `well_conditioned_steps` finds good ones. They are the counts as run:
        for shorter steps multiply all of them, which changes no weight.
    observables : mapping of str to Operator
        At least one.
    tolerance : float, optional
        Where given, a certified reference is run as well, the error of every value is measured, and the largest is
        judged.
    reference_tolerance : float, optional
        Error bound asked of the reference state. Default 1e-10, or a hundredth of `tolerance` where that is less.
    threads : int, optional
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Extrapolation

    Raises
    ------
    FormulaError
        The name is not registered, or the formula is not symmetric: its observables then have odd powers of the step
        too, and these weights do not cancel them.
    ArgumentError
        Step counts, times or rule are out of range.
    PartitionError
        Unknown rule, or own parts that do not sum to the Hamiltonian.
    AuditError
        No observables.
    StateShapeError
        The state is on another number of qubits than the operator or an observable.
    ToleranceError
        `tolerance` is not positive, or cannot be certified in double precision.
    MemoryRefusedError
        Two state vectors (five with a tolerance) do not fit.

    Notes
    -----
    A symmetric step is exp(-i τ H(τ)) with H(τ) = H + τ^p E_p + τ^(p+2) E_(p+2) + …, even in τ, so at a fixed time any
    expectation is a series in even powers of 1/k, from k^-p on; `multiproduct_weights` annuls its first m - 1 terms.
    That is an expansion for short steps: it tells nothing where the steps are long. An error of a single value, be it
    rounding, device noise or the noise of counting shots, is carried with Σ |a_j|. Run time: Σ k_j steps for each time.

    References
    ----------
    .. [1] S. A. Chin, "Multi-product splitting and Runge-Kutta-Nyström integrators", Celest. Mech. Dyn. Astron. 106,
       391 (2010). From memory.
    .. [2] G. H. Low, V. Kliuchnikov, N. Wiebe, "Well-conditioned multiproduct Hamiltonian simulation",
       arXiv 1907.11679 (2019). From memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.extrapolation import extrapolate
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7)
    >>> watched = {"m": tt.Operator("Z_1", qubits=4)}
    >>> found = extrapolate(chain, tt.State.product("0000"), 1.0, steps=(4, 8, 24), observables=watched, tolerance=1e-6)
    >>> print(*found.weights, found.norm1, found.verdict)
    1/105 -1/6 81/70 4/3 meets
    """
    candidate = Candidate(formula, rule, 1)  # type: ignore[arg-type]
    counts = _steps(steps)
    asked = positive_times(times)
    watched = named_operators(observables)
    if not isinstance(candidate.formula, Formula):
        raise FormulaError(
            f"formula: is a processed one ({candidate.formula.name!r}), and the powers of the step in its error are not "
            "known to be even; use a symmetric formula, such as 'strang'",
            name=candidate.formula.name,
            choices=(),
        )
    _check(candidate.formula, state, operator, watched, tolerance)
    workers = _threads.resolve(threads)
    partition = candidate.partition(operator)
    vectors = 2 if tolerance is None else 5
    _memory.require(vectors * (16 << state.qubits), "extrapolate", vectors)
    order = candidate.formula.order + candidate.formula.order % 2
    weights = multiproduct_weights(counts, order)
    truth = None
    if tolerance is not None:
        truth = reference_for(
            operator, state, asked, tolerance, reference_tolerance, watched, threads=workers, progress=progress
        )
    bench = _Bench(candidate.formula, partition, state, watched, workers)
    for place, k in enumerate(counts):
        if progress is not None:
            progress(f"{candidate.label}: {k} steps", place, len(counts))
        bench.run(asked, k)
    if progress is not None:
        progress("done", len(counts), len(counts))

    values = {name: _combined(weights, bench.values[name]) for name in watched}
    rounding = {name: _rounding(weights, bench.bounds[name], values[name]) for name in watched}
    without = counts.index(min(counts))
    rest = [place for place in range(len(counts)) if place != without]
    coarser = multiproduct_weights([counts[place] for place in rest], order)
    truncation = {
        name: np.abs(values[name] - _combined(coarser, [bench.values[name][place] for place in rest]))
        for name in watched
    }
    measured, verdict = None, None
    if truth is not None and tolerance is not None:
        measured = {name: _measured(truth, name, values[name], rounding[name]) for name in watched}
        largest = np.max([found.max(axis=0) for found in measured.values()], axis=0)
        verdict = judge((float(largest[0]), float(largest[1])), tolerance)
    return Extrapolation(
        formula=candidate.formula,
        rule=rule if isinstance(rule, str) else "own parts",
        steps=counts,
        order=combined_order(len(counts), order),
        weights=weights,
        norm1=sum((abs(weight) for weight in weights), Fraction(0)),
        times=tuple(asked),
        base_values={name: np.array(found) for name, found in bench.values.items()},
        base_bounds={name: np.array(found) for name, found in bench.bounds.items()},
        values=values,
        rounding=rounding,
        truncation=truncation,
        error={name: truncation[name] + rounding[name] for name in watched},
        measured_error=measured,
        tolerance=tolerance,
        verdict=verdict,
        two_qubit_gates=tuple(candidate.formula.rotations(partition, max(asked), k).two_qubit_gates() for k in counts),
        reference=truth,
    )


class _Bench:
    """Runs circuits and records expectations with the bound on their rounding.

    The identity term of an observable counts with the norm of the start, which a circuit keeps: the vector at hand
    keeps it only up to rounding, and that would have to be paid for with the size of the term.
    """

    def __init__(
        self, formula: Formula, partition: Partition, start: State, watched: Mapping[str, Operator], threads: int
    ) -> None:
        self.formula, self.partition, self.start, self.threads = formula, partition, start, threads
        self.unit = 2.0**-24 if start.dtype == np.dtype(np.complex64) else UNIT
        self.length = start.norm(threads=threads)
        self.bare = {name: observable.without_identity() for name, observable in watched.items()}
        self.constants = {name: found.identity_coefficient * self.length**2 for name, found in watched.items()}
        self.norms = {name: norm_bound(observable) for name, observable in watched.items()}
        square = max(1.0, self.length) ** 2
        self.reading = {
            name: (expectation_rounding(observable, start.qubits) + 8.0 * UNIT * abs(self.constants[name])) * square
            for name, observable in watched.items()
        }
        self.values: dict[str, list[list[float]]] = {name: [] for name in watched}
        self.bounds: dict[str, list[list[float]]] = {name: [] for name in watched}
        self.work = start.copy()

    def run(self, times: Sequence[float], steps: int) -> None:
        """Add a line of values, one a time."""
        for name in self.bare:
            self.values[name].append([])
            self.bounds[name].append([])
        for time in times:
            circuit = self.formula.rotations(self.partition, time, steps)
            longest = max(1.0, self.length)
            rounding = circuit.rounding_bound(ANGLE_ROUNDINGS, self.unit) * longest
            np.copyto(self.work.amplitudes, self.start.amplitudes)
            self.work.apply(circuit, threads=self.threads)
            for name, observable in self.bare.items():
                value = self.constants[name] + self.work.expectation(observable, threads=self.threads)
                shift = expectation_shift(self.norms[name], rounding, longest)
                self.values[name][-1].append(value)
                self.bounds[name][-1].append(shift + self.reading[name] * (self.unit / UNIT))


def _combined(weights: Sequence[Fraction], values: Sequence[Sequence[float]]) -> Array:
    """Σ a_j v_j for each time: exact, then rounded once."""
    return np.array(
        [
            float(sum(weight * Fraction(value) for weight, value in zip(weights, column, strict=True)))
            for column in zip(*values, strict=True)
        ]
    )


def _rounding(weights: Sequence[Fraction], bounds: Sequence[Sequence[float]], values: Array) -> Array:
    carried = _combined([abs(weight) for weight in weights], bounds)
    # The last factor covers the roundings of this line itself.
    return (carried + UNIT * np.abs(values)) * (1.0 + 8.0 * UNIT)


def _measured(truth: Reference, name: str, values: Array, rounding: Array) -> Array:
    apart = np.abs(values - truth.expectations[name])
    slack = rounding + truth.expectation_bounds[name] + UNIT * apart
    return np.stack([np.maximum(0.0, apart - slack), apart + slack], axis=1)


def _steps(steps: Iterable[int]) -> tuple[int, ...]:
    counts = checked_steps(steps)
    if len(counts) < 2:
        raise ArgumentError(
            f"steps: one count leaves nothing to compare with ({counts[0]}); give at least two, such as "
            f"({counts[0]}, {2 * counts[0]})",
            argument="steps",
            value=steps,
        )
    return counts


def _check(
    formula: Formula, state: State, operator: Operator, observables: Mapping[str, Operator], tolerance: float | None
) -> None:
    if not formula.symmetric:
        raise FormulaError(
            f"formula: is not symmetric ({formula.name!r}), so observables have odd powers of the step too and "
            "these weights do not cancel them; use a symmetric one, such as 'strang'",
            name=formula.name,
            choices=(),
        )
    if not observables:
        raise AuditError("observables: empty ({}); name at least one", reason="no observables", limit=None)
    require_same_qubits(state, operator, "operator")
    for name, observable in observables.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")
    number = isinstance(tolerance, (int, float)) and not isinstance(tolerance, bool)
    if tolerance is not None and not (number and 0.0 < tolerance < math.inf):
        raise ToleranceError(
            f"tolerance: not a positive number ({tolerance!r}); give one, or leave it out to run no reference",
            tolerance=tolerance,
            achievable=1e-8,
        )
