"""The step counts of one candidate that were run, and the row that they make."""

from __future__ import annotations

import time as clock
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import NamedTuple

from trueturn.accuracy.bounds import bound
from trueturn.audit import words
from trueturn.audit.base_candidate import BaseCandidate, gates_and_depth
from trueturn.audit.candidate import Candidate
from trueturn.audit.measure import Bench, Measured
from trueturn.audit.result import Row, Trial
from trueturn.audit.search import least_steps
from trueturn.errors import AuditError, FormulaError
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["Chosen", "Runs", "error_per_distance"]


class Chosen(NamedTuple):
    """A step count for a row, with what the reader must know about how it was found.

    `verified` is False where a search was interrupted or found nothing: the step count is then not the least.
    """

    steps: int
    accidental: tuple[int, ...] = ()
    note: str = ""
    verified: bool = True


@dataclass
class Runs:
    """What was run of one formula on one partition; a step count runs once however often it is asked for."""

    bench: Bench
    candidate: BaseCandidate
    partition: Partition | None
    measured: dict[int, Measured] = field(default_factory=dict)
    seconds: dict[int, float] = field(default_factory=dict)

    def run(self, steps: int) -> Trial:
        """Measure the candidate with `steps` steps, unless it was done before."""
        if steps not in self.measured:
            began = clock.perf_counter()
            self.measured[steps] = self.bench.measure(self.candidate, self.partition, steps)
            self.seconds[steps] = clock.perf_counter() - began
        return self.measured[steps].trial

    def circuit(self, steps: int) -> Rotations:
        """Return the circuit of a step count that was run, for a candidate whose circuits are known, such as a formula."""
        circuit = self.measured[steps].circuit
        assert circuit is not None
        return circuit

    def search(self, most_steps: int, tell: Callable[[int], None]) -> Chosen:
        """Search for the least step count.

        Raises
        ------
        AuditError
            `most_steps` is below the coarsest grid that meets every time.
        """
        unit = self.bench.step_unit()
        if most_steps < unit:
            raise AuditError(
                f"most_steps: below the coarsest grid that meets every time ({most_steps}); give {unit} or more",
                reason="most_steps below the grid",
                limit=unit,
            )

        def run(steps: int) -> Trial:
            tell(steps)
            return self.run(steps)

        tolerance = self.bench.tolerance
        found = least_steps(run, tolerance, self.candidate.order, unit=unit, most_steps=most_steps)
        return Chosen(
            found.steps, found.accidental, words.search_note(found, tolerance, most_steps), verified=found.found
        )

    def best_so_far(self, stopped: str) -> Chosen | None:
        """Choose from the runs of a search that was stopped, with the reason; None where nothing was run.

        The smallest step count that meets the tolerance and above which no run misses it, else the largest that was run.
        """
        if not self.measured:
            return None
        missing = [steps for steps, found in self.measured.items() if found.trial.verdict != "meets"]
        passing = [steps for steps in self.measured if steps > max(missing, default=0)]
        steps = min(passing) if passing else max(self.measured)
        accidental = tuple(sorted(count for count in self.measured if count not in missing and count < steps))
        untried = "fewer steps may do" if passing else "more steps were not tried"
        return Chosen(steps, accidental, f"{stopped}: {untried}", verified=False)

    def row(self, chosen: Chosen, effort: float, method: str = "commutator") -> Row:
        """Make the row of a step count that was run, with a proven bound of this method and effort, none for 0."""
        found = self.measured[chosen.steps]
        circuit = found.circuit
        counts = None if circuit is None else circuit.gate_counts
        limit, source = self._bound(chosen.steps, effort, method) if effort > 0.0 else (None, "not computed")
        return Row(
            candidate=self.candidate,
            label=self.candidate.label,
            steps=chosen.steps,
            error=found.trial.error,
            bound=limit,
            bound_source=source,
            rotations=None if circuit is None else circuit.count,
            two_qubit_gates=found.trial.two_qubit_gates,
            depth=None if circuit is None else gates_and_depth(circuit)[1],
            verdict=found.trial.verdict,
            rounding=found.rounding,
            points=found.points,
            trials=tuple(self.measured[count].trial for count in sorted(self.measured)),
            accidental=chosen.accidental,
            note="; ".join(filter(None, (chosen.note, found.note, "" if counts is None else counts.words))),
            gate_counts=counts,
        )

    def _bound(self, steps: int, effort: float, method: str) -> tuple[float | None, str]:
        """Return a proven bound on the error at a step count and its source, or None and the reason."""
        bench = self.bench
        if not isinstance(self.candidate, Candidate) or self.partition is None:
            return None, "no formula, so no theorem on its error"
        try:
            found = bound(self.candidate.formula, self.partition, bench.times[-1], steps, method=method, effort=effort)
        except FormulaError:
            return None, f"no theorem at hand covers {self.candidate.name}"
        source = "; ".join((f"{found.theorem}, {found.source}", *(f"left out: {one}" for one in found.left_out)))
        if bench.quantity != "observables":
            what = "unit vectors" if bench.quantity == "state" else "unitary matrices"
            return (found.value, source) if found.value < 2.0 else (2.0, f"no two {what} are further apart")
        # No two values of an observable are further apart than 2 ‖O‖.
        per_distance = error_per_distance(bench)
        if found.value >= 1.0:
            return per_distance, "no two values of the observable are further apart"
        return per_distance * found.value, f"{source}, times twice the observable's norm"


def error_per_distance(bench: Bench) -> float:
    """Return c such that the error of a circuit is at most c times its spectral-norm distance from exp(-iHt).

    For a state or the operator c is 1. For observables |<O>_S - <O>| ≤ 2 ‖O‖ ‖S - U‖ with unitary S and U, the identity
    removed.
    """
    if bench.quantity != "observables":
        return 1.0
    return 2.0 * (1.0 if bench.relative_to == "norm" else max(bench.norms.values()))
