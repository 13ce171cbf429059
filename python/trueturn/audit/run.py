"""Carries an audit out: reference first, then every candidate against it."""

from __future__ import annotations

import math
import time as clock
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from numbers import Real

from trueturn import _memory, _threads
from trueturn._observables import named_operators
from trueturn.audit import words
from trueturn.audit.candidate import Candidate
from trueturn.audit.measure import Bench
from trueturn.audit.result import Audit, Row
from trueturn.audit.runs import Chosen, Runs
from trueturn.audit.truth import Progress, positive_times, reference_for
from trueturn.errors import ArgumentError, AuditError, ToleranceError
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
    candidates: Sequence[Candidate],
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
        ``quantity="state"`` one reference state for each time.

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

        def tell(steps: int, candidate: Candidate = candidate, number: int = number) -> None:
            if progress is not None:
                progress(f"{candidate.label}: {steps} steps", number, len(candidates))

        runs = Runs(setting.bench, candidate, partition)
        if isinstance(candidate.steps, int):
            tell(candidate.steps)
            runs.run(candidate.steps)
            chosen = Chosen(candidate.steps)
        else:
            chosen = runs.search(most_steps, tell)
        rows.append(runs.row(chosen))
        seconds[f"candidate {number + 1}"] = clock.perf_counter() - started
    if progress is not None:
        progress("done", len(candidates), len(candidates))
    return setting.concluded(rows, seconds, title=title, start=start, energy_unit=energy_unit)


@dataclass(frozen=True)
class Setting:
    """What candidates are judged against: all of an audit but its rows."""

    bench: Bench
    operator: Operator
    partitions: tuple[Partition, ...]

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
            start=start or f"a given state vector of {bench.start.qubits} qubits",
            title=title,
            energy_unit=energy_unit,
            assumptions=words.assumptions(bench.start, bench.readout, bench.relative_to),
            proven=words.proven(truth),
            measured=words.measured(bench.quantity, truth.certificate.proven),
            cautions=words.CAUTIONS,
            seconds=seconds,
        )


def prepare(
    operator: Operator,
    state: State,
    times: float | Iterable[float],
    candidates: Sequence[Candidate],
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
    partitions: Sequence[Partition] | None = None,
) -> Setting:
    """Check everything that `audit` takes, and compute the reference; parameters and errors are those of `audit`.

    `partitions` are those of the candidates, where they are known.
    """
    watched = named_operators(observables)
    asked = sorted(set(positive_times(times)))
    _check(operator, state, candidates, tolerance, quantity, watched, readout, relative_to, most_steps)
    workers = _threads.resolve(threads)
    if partitions is None:
        partitions = [candidate.partition(operator) for candidate in candidates]
    _memory.require(
        (2 + (len(asked) if quantity == "state" else 1)) * (16 << state.qubits),
        "audit",
        lambda n: (2 + (len(asked) if quantity == "state" else 1)) * (16 << n),
    )
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
    bench = Bench(state, asked, truth, tolerance, quantity, watched, relative_to, readout, workers)
    return Setting(bench, operator, tuple(partitions))


def _check(
    operator: Operator,
    state: State,
    candidates: Sequence[Candidate],
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
    if not isinstance(candidates, Sequence) or not candidates or not all(isinstance(c, Candidate) for c in candidates):
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
