"""Carries an audit out: reference first, then every candidate against it."""

from __future__ import annotations

import math
import time as clock
from collections.abc import Callable, Iterable, Mapping, Sequence
from numbers import Real

from trueturn import _memory, _threads
from trueturn._observables import named_operators
from trueturn.accuracy.bounds import bound
from trueturn.audit import words
from trueturn.audit.base_candidate import BaseCandidate
from trueturn.audit.candidate import Candidate
from trueturn.audit.implementation import Implementation
from trueturn.audit.measure import Bench, Measured
from trueturn.audit.result import Audit, Row, Trial
from trueturn.audit.search import least_steps
from trueturn.audit.truth import Progress, positive_times, reference_for
from trueturn.errors import ArgumentError, AuditError, FormulaError, ToleranceError
from trueturn.formulas import Formula
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.state import State, require_same_qubits

__all__ = ["audit"]

QUANTITIES = ("observables", "state")
READOUTS = ("along", "separate")


def audit(
    operator: Operator,
    state: State,
    times: float | Iterable[float],
    candidates: Sequence[BaseCandidate],
    tolerance: float,
    quantity: str = "observables",
    observables: Mapping[str, Operator] | None = None,
    readout: str = "along",
    *,
    relative_to: str | None = None,
    reference_tolerance: float | None = None,
    reference_method: str = "chebyshev",
    most_steps: int = 1_000_000,
    threads: int | None = None,
    progress: Progress | None = None,
    title: str = "",
    start: str = "",
    energy_unit: str = "",
) -> Audit:
    """Judge candidate circuits against a certified reference.

    Parameters
    ----------
    operator : Operator
        The Hamiltonian; ħ = 1.
    state : State
        Start; not written.
    times : float or iterable of float
        Positive, in inverse units of the coefficients.
    candidates : sequence of Candidate
        Formulas with a rule and steps; `Candidate.from_rotations` and `Candidate.from_callable` make candidates of given
        circuits and of a user's own implementation.
    tolerance : float
        On the largest error over times and observables; absolute.
    quantity : "observables" or "state"
        Largest |<O>_S - <O>| over `observables`, or ‖ψ_S - ψ‖ with the global phase kept.
    observables : mapping of str to Operator
        Needed for ``quantity="observables"``.
    readout : "along" or "separate"
        One circuit of `steps` equal steps to the last time, read on the way; or a circuit of `steps` steps for each time.
    relative_to : None or "norm"
        ``"norm"`` divides each observable's error by a proven bound on its norm (identity removed).
    reference_tolerance : float, optional
        Error bound asked of the reference state. Default 1e-10, or a hundredth of `tolerance` where that is less; where
        double precision cannot certify so much but can certify a hundredth of `tolerance`, what it can.
    reference_method : "chebyshev", "krylov" or "dense"
    most_steps : int
        Where a search for the least step count gives up.
    threads : int, optional
    progress : callable, optional
        Called with (stage, done, total).
    title, start, energy_unit : str
        Labels for the report.

    Returns
    -------
    Audit

    Raises
    ------
    ArgumentError, AuditError
        Something is out of range; the message says what and what to do.
    ToleranceError
        The tolerance is not positive, or below what double precision can certify.
    MemoryRefusedError
        The vectors needed do not fit: start, reference and one work vector at a time, and for
        ``quantity="state"`` one reference state for each time, and two more for an implementation of the user's.

    Notes
    -----
    Every error is an interval: measured ∓ (reference bound + rounding of the candidate + rounding of the expectation).
    Verdicts use the whole interval.

    Examples
    --------
    >>> import trueturn as tt
    >>> chain = tt.model.ising(tt.lattice.chain(4), zz=-1.0, x=-0.7)
    >>> start = tt.State.product("0000")
    >>> found = tt.audit(chain, start, 1.0, [tt.Candidate("strang")], 1e-3, observables={"m": tt.Operator("Z_1", qubits=4)})
    >>> found.verdict
    'meets'
    """
    began = clock.perf_counter()
    watched = named_operators(observables)
    asked = sorted(set(positive_times(times)))
    _check(operator, state, candidates, tolerance, quantity, watched, readout, relative_to, most_steps)
    workers = _threads.resolve(threads)
    partitions = [candidate.prepare(operator, asked) for candidate in candidates]
    vectors = 2 + (len(asked) if quantity == "state" else 1)
    vectors += 2 * any(isinstance(candidate, Implementation) for candidate in candidates)
    _memory.require(vectors * (16 << state.qubits), "audit", vectors)
    truth = reference_for(
        operator,
        state,
        asked,
        tolerance,
        reference_tolerance,
        watched,
        method=reference_method,
        keep="all" if quantity == "state" else "last",
        threads=workers,
        progress=progress,
    )
    seconds = {"reference": clock.perf_counter() - began}
    bench = Bench(state, asked, truth, tolerance, quantity, watched, relative_to, readout, workers)
    rows = []
    for number, (candidate, partition) in enumerate(zip(candidates, partitions, strict=True)):
        started = clock.perf_counter()

        def tell(steps: int, candidate: BaseCandidate = candidate, number: int = number) -> None:
            if progress is not None:
                progress(f"{candidate.label}: {steps} steps", number, len(candidates))

        rows.append(_row(bench, candidate, partition, most_steps, tell))
        seconds[f"candidate {number + 1}"] = clock.perf_counter() - started
    if progress is not None:
        progress("done", len(candidates), len(candidates))
    recommended, reason = words.recommendation(rows, tolerance)
    verdicts = {row.verdict for row in rows}
    return Audit(
        rows=tuple(rows),
        recommended=recommended,
        reason=reason,
        verdict=next(verdict for verdict in ("meets", "undecided", "misses") if verdict in verdicts),
        reference=truth,
        quantity=quantity,
        tolerance=tolerance,
        relative_to=relative_to,
        times=tuple(asked),
        readout=readout,
        observables=watched,
        operator=operator,
        start=start or f"a given state vector of {state.qubits} qubits",
        title=title,
        energy_unit=energy_unit,
        assumptions=words.assumptions(state, readout, relative_to, candidates),
        proven=words.proven(truth),
        measured=words.measured(quantity, truth.certificate.proven),
        cautions=words.CAUTIONS,
        seconds=seconds,
    )


def _row(
    bench: Bench, candidate: BaseCandidate, partition: Partition | None, most_steps: int, tell: Callable[[int], None]
) -> Row:
    runs: dict[int, Measured] = {}

    def run(steps: int) -> Trial:
        tell(steps)
        runs[steps] = bench.measure(candidate, partition, steps)
        return runs[steps].trial

    note = ""
    accidental: tuple[int, ...] = ()
    if isinstance(candidate.steps, int):
        run(candidate.steps)
        steps = candidate.steps
    else:
        unit = bench.step_unit()
        if most_steps < unit:
            raise AuditError(
                f"most_steps: below the coarsest grid that meets every time ({most_steps}); give {unit} or more",
                reason="most_steps below the grid",
                limit=unit,
            )
        found = least_steps(run, bench.tolerance, candidate.order, unit=unit, most_steps=most_steps)
        steps, accidental = found.steps, found.accidental
        note = words.search_note(found, bench.tolerance, most_steps)
    chosen = runs[steps]
    circuit = chosen.circuit
    limit, source = _bound(bench, candidate, partition, steps)
    return Row(
        candidate=candidate,
        label=candidate.label,
        steps=steps,
        error=chosen.trial.error,
        bound=limit,
        bound_source=source,
        rotations=None if circuit is None else circuit.count,
        two_qubit_gates=chosen.trial.two_qubit_gates,
        depth=None if circuit is None else circuit.depth(),
        verdict=chosen.trial.verdict,
        rounding=chosen.rounding,
        points=chosen.points,
        trials=tuple(runs[count].trial for count in sorted(runs)),
        accidental=accidental,
        note="; ".join(filter(None, (note, chosen.note))),
    )


def _bound(bench: Bench, candidate: BaseCandidate, partition: Partition | None, steps: int) -> tuple[float | None, str]:
    """Return a proven bound on the row's error and its source, or None and the reason."""
    uncovered = f"no theorem at hand covers {candidate.name}"
    if not isinstance(candidate, Candidate):
        return None, "no formula, so no theorem on its error"
    if partition is None or not isinstance(candidate.formula, Formula):
        return None, uncovered
    try:
        found = bound(candidate.formula, partition, bench.times[-1], steps)
    except FormulaError:
        return None, uncovered
    source = f"{found.theorem}, {found.source}"
    if bench.quantity == "state":
        return (found.value, source) if found.value < 2.0 else (2.0, "no two unit vectors are further apart")
    # |<O>_S - <O>| ≤ 2 ‖O‖ ‖S - U‖ for unitary S and U, the identity removed; and never more than 2 ‖O‖.
    largest = 1.0 if bench.relative_to == "norm" else max(bench.norms.values())
    if found.value >= 1.0:
        return 2.0 * largest, "no two values of the observable are further apart"
    return 2.0 * largest * found.value, f"{source}, times twice the observable's norm"


def _check(
    operator: Operator,
    state: State,
    candidates: Sequence[BaseCandidate],
    tolerance: float,
    quantity: str,
    observables: Mapping[str, Operator],
    readout: str,
    relative_to: str | None,
    most_steps: int,
) -> None:
    if isinstance(tolerance, bool) or not isinstance(tolerance, Real) or not 0.0 < float(tolerance) < math.inf:
        raise ToleranceError(
            f"tolerance: not a positive number ({tolerance!r}); 1e-8 and above can usually be judged",
            tolerance=tolerance,
            achievable=1e-8,
        )
    if quantity not in QUANTITIES:
        raise _choice("quantity", quantity, QUANTITIES)
    if readout not in READOUTS:
        raise _choice("readout", readout, READOUTS)
    if relative_to not in (None, "norm"):
        raise _choice("relative_to", relative_to, (None, "norm"))
    if relative_to == "norm" and quantity == "state":
        raise AuditError(
            "relative_to: a state error has no norm to divide by (quantity='state'); leave it out",
            reason="relative_to with a state error",
            limit=None,
        )
    if quantity == "observables" and not observables:
        raise AuditError(
            "observables: empty (quantity='observables'); name at least one, or ask for quantity='state'",
            reason="no observables",
            limit=None,
        )
    if isinstance(most_steps, bool) or not isinstance(most_steps, int) or most_steps < 1:
        raise ArgumentError(
            f"most_steps: not a positive whole number ({most_steps!r}); give 1 or more",
            argument="most_steps",
            value=most_steps,
        )
    if (
        not isinstance(candidates, Sequence)
        or not candidates
        or not all(isinstance(candidate, BaseCandidate) for candidate in candidates)
    ):
        raise AuditError(
            f"candidates: no list of Candidate ({candidates!r}); give at least one",
            reason="no candidates",
            limit=None,
        )
    require_same_qubits(state, operator, "operator")
    for name, observable in observables.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")


def _choice(argument: str, value: object, choices: Sequence[object]) -> ArgumentError:
    return ArgumentError(
        f"{argument}: unknown ({value!r}); give one of {', '.join(map(repr, choices))}", argument=argument, value=value
    )
