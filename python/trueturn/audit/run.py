"""Carries an audit out: reference first, then every candidate against it."""

from __future__ import annotations

import math
import time as clock
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from numbers import Real

from trueturn import _memory, _threads
from trueturn._observables import named_operators
from trueturn.accuracy.difference import DENSE_QUBITS
from trueturn.audit import words
from trueturn.audit.base_candidate import BaseCandidate
from trueturn.audit.implementation import Implementation
from trueturn.audit.measure import Bench
from trueturn.audit.operator_measure import OperatorBench
from trueturn.audit.result import Audit, Row
from trueturn.audit.runs import Chosen, Runs
from trueturn.audit.truth import Progress, positive_times, reference_for
from trueturn.errors import ArgumentError, AuditError, ToleranceError
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.randomised.checks import checked_operator
from trueturn.state import State, require_same_qubits

__all__ = ["audit"]

QUANTITIES = ("observables", "state", "operator")
READOUTS = ("along", "separate")
BOUND_EFFORT = 1 / 16
"""Share of the usual work that the proven bound of a row may take: half a second; `bound` itself gives tighter ones."""


def audit(
    operator: Operator,
    state: State | None,
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
    state : State or None
        Start; not written. With ``quantity="operator"`` every start counts, and None will do.
    times : float or iterable of float
        Positive, in inverse units of the coefficients.
    candidates : sequence of Candidate
        Formulas with a rule and steps; `Candidate.from_rotations` and `Candidate.from_callable` make candidates of given
        circuits and of a user's own implementation, whose operator error is not judged.
    tolerance : float
        On the largest error over times and observables; absolute.
    quantity : "observables", "state" or "operator"
        Largest |<O>_S - <O>| over `observables`; ‖ψ_S - ψ‖ with the global phase kept; or ‖S - exp(-iHt)‖ in the spectral
        norm, for all starts at once: by whole matrices up to 10 qubits, else by power iteration, whose upper ends hold with
        a probability of at least 0.999 each (`operator_error`).
    observables : mapping of str to Operator
        Needed for ``quantity="observables"``; not used for ``"operator"``.
    readout : "along" or "separate"
        One circuit of `steps` equal steps to the last time, read on the way; or a circuit of `steps` steps for each time.
    relative_to : None or "norm"
        ``"norm"`` divides each observable's error by a proven bound on its norm (identity removed).
    reference_tolerance : float, optional
        Error bound asked of the reference state. Default 1e-10, or a hundredth of `tolerance` where that is less; where
        double precision cannot certify so much but can certify a hundredth of `tolerance`, what it can.
    reference_method : "chebyshev", "krylov" or "dense"
        Not asked for ``quantity="operator"``, which takes dense up to 10 qubits and Chebyshev beyond.
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
        ``quantity="state"`` one reference state for each time, and two more for an implementation of the user's. For
        ``quantity="operator"`` six vectors, or up to 10 qubits six matrices and one for each time.

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
    setting = prepare(
        operator,
        state,
        times,
        candidates,
        tolerance,
        quantity,
        observables,
        readout,
        relative_to=relative_to,
        reference_tolerance=reference_tolerance,
        reference_method=reference_method,
        most_steps=most_steps,
        threads=threads,
        progress=progress,
    )
    seconds = {"reference": clock.perf_counter() - began}
    rows = []
    for number, (candidate, partition) in enumerate(zip(candidates, setting.partitions, strict=True)):
        started = clock.perf_counter()

        def tell(steps: int, candidate: BaseCandidate = candidate, number: int = number) -> None:
            if progress is not None:
                progress(f"{candidate.label}: {steps} steps", number, len(candidates))

        runs = Runs(setting.bench, candidate, partition)
        if isinstance(candidate.steps, int):
            tell(candidate.steps)
            runs.run(candidate.steps)
            chosen = Chosen(candidate.steps)
        else:
            chosen = runs.search(most_steps, tell)
        rows.append(runs.row(chosen, BOUND_EFFORT))
        seconds[f"candidate {number + 1}"] = clock.perf_counter() - started
    if progress is not None:
        progress("done", len(candidates), len(candidates))
    return setting.concluded(rows, seconds, title=title, start=start, energy_unit=energy_unit)


@dataclass(frozen=True)
class Setting:
    """What candidates are judged against: all of an audit but its rows."""

    bench: Bench
    operator: Operator
    partitions: tuple[Partition | None, ...]

    def concluded(
        self, rows: Sequence[Row], seconds: Mapping[str, float], *, title: str, start: str, energy_unit: str
    ) -> Audit:
        """Put the rows, at least one, and all that is said about them together."""
        bench, truth = self.bench, self.bench.reference
        recommended, reason = words.recommendation(rows, bench.tolerance)
        verdicts = {row.verdict for row in rows}
        return Audit(
            rows=tuple(rows),
            recommended=recommended,
            reason=reason,
            verdict=next(verdict for verdict in ("meets", "undecided", "misses") if verdict in verdicts),
            reference=truth,
            quantity=bench.quantity,
            tolerance=bench.tolerance,
            relative_to=bench.relative_to,
            times=tuple(bench.times),
            readout=bench.readout,
            observables=bench.observables,
            operator=self.operator,
            start=words.start(start, bench.start, bench.quantity),
            title=title,
            energy_unit=energy_unit,
            assumptions=words.assumptions(
                bench.start, bench.readout, bench.relative_to, bench.quantity, [row.candidate for row in rows]
            ),
            proven=words.proven(truth),
            measured=words.measured(bench.quantity, truth.certificate.proven),
            cautions=words.cautions(bench.quantity),
            seconds=seconds,
        )


def prepare(
    operator: Operator,
    state: State | None,
    times: float | Iterable[float],
    candidates: Sequence[BaseCandidate],
    tolerance: float,
    quantity: str,
    observables: Mapping[str, Operator] | None,
    readout: str,
    *,
    relative_to: str | None,
    reference_tolerance: float | None,
    reference_method: str,
    most_steps: int,
    threads: int | None,
    progress: Progress | None,
    partitions: Sequence[Partition | None] | None = None,
) -> Setting:
    """Check everything that `audit` takes, and compute the reference; parameters and errors are those of `audit`.

    `partitions` are those of the candidates, where they are known.
    """
    watched = {} if quantity == "operator" else named_operators(observables)
    asked = sorted(set(positive_times(times)))
    start = _start(state, operator, quantity)
    _check(operator, start, candidates, tolerance, quantity, watched, readout, relative_to, most_steps)
    workers = _threads.resolve(threads)
    if partitions is None:
        partitions = [candidate.prepare(operator, asked) for candidate in candidates]
    vectors = {"observables": 3, "state": 2 + len(asked), "operator": 6}[quantity]
    vectors += 2 * any(isinstance(candidate, Implementation) for candidate in candidates)
    _memory.require(vectors * (16 << start.qubits), "audit", vectors)
    if quantity == "operator":
        reference_method = "dense" if start.qubits <= DENSE_QUBITS else "chebyshev"
    truth = reference_for(
        operator,
        start,
        asked,
        tolerance,
        reference_tolerance,
        watched,
        method=reference_method,
        keep="all" if quantity == "state" else "last",
        threads=workers,
        progress=progress,
    )
    given = (start, asked, truth, tolerance, quantity, watched, relative_to, readout, workers)
    bench = OperatorBench(*given, operator) if quantity == "operator" else Bench(*given)
    return Setting(bench, operator, tuple(partitions))


def _start(state: State | None, operator: Operator, quantity: str) -> State:
    """Return the start; where every start counts, any will do for the reference."""
    if state is not None:
        return state
    if quantity != "operator":
        raise ArgumentError(
            f"state: missing (None) where quantity={quantity!r}; give a start, or quantity='operator' for all at once",
            argument="state",
            value=None,
        )
    return State.computational(0, checked_operator("operator", operator).qubits)


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
    if relative_to == "norm" and quantity != "observables":
        raise AuditError(
            f"relative_to: {'a state' if quantity == 'state' else 'an operator'} error has no norm to divide by "
            f"(quantity={quantity!r}); leave it out",
            reason=f"relative_to with {quantity} errors",
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
        or not all(isinstance(c, BaseCandidate) for c in candidates)
    ):
        raise AuditError(
            f"candidates: no list of Candidate ({candidates!r}); give at least one",
            reason="no candidates",
            limit=None,
        )
    own = next((candidate for candidate in candidates if isinstance(candidate, Implementation)), None)
    if quantity == "operator" and own is not None:
        raise AuditError(
            f"quantity: the operator error needs a circuit, and {own.name!r} is a function; "
            "ask for quantity='state' or 'observables'",
            reason="operator error of an implementation",
            limit=None,
        )
    require_same_qubits(state, operator, "operator")
    for name, observable in observables.items():
        require_same_qubits(state, observable, f"observables[{name!r}]")


def _choice(argument: str, value: object, choices: Sequence[object]) -> ArgumentError:
    return ArgumentError(
        f"{argument}: unknown ({value!r}); give one of {', '.join(map(repr, choices))}", argument=argument, value=value
    )
