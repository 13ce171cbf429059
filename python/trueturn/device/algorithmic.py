"""The algorithmic error of one expectation as a function of the step count: proven, fitted to measurements, or given."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

from trueturn import _threads
from trueturn.accuracy import Bound, bound
from trueturn.audit.candidate import Candidate
from trueturn.audit.figures import nearest
from trueturn.audit.measure import Bench
from trueturn.audit.truth import Progress, reference_for
from trueturn.errors import ArgumentError
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.scaling import FEWEST_POINTS, PowerLaw
from trueturn.state import State

__all__ = ["ErrorLaw", "Measurements", "given_law", "proven_law"]

Interval = tuple[float, float]

# A law is fitted to the last so many step counts that were run, the asymptotic end; at least the fewest are run, each
# so much larger than the one before.
_POINTS, _FEWEST, _GROWTH = 8, 6, 1.5


@dataclass
class ErrorLaw:
    """An error as a function of the step count, at most `width`.

    Attributes
    ----------
    kind : "proven", "fitted" or "given"
    words : callable
        Says where the error at a step count comes from.
    width : float
        No two expectations differ by more.
    """

    kind: str
    words: Callable[[int], str]
    width: float
    rule: Callable[[int], float]
    known: dict[int, float] = field(default_factory=dict)

    def __call__(self, steps: int) -> float:
        if steps not in self.known:
            self.known[steps] = min(self.width, max(0.0, self.rule(steps)))
        return self.known[steps]


def proven_law(candidate: Candidate, partition: Partition, time: float, width: float) -> ErrorLaw:
    """Take the tightest proven bound: |⟨O⟩_S - ⟨O⟩| ≤ W ‖S - exp(-iHt)‖, with W the distance of O's extreme eigenvalues.

    Which theorem is the tightest may change with the step count, and so do the words.

    Raises
    ------
    FormulaError
        The parts lack a structure that the formula requires.
    """
    formula = candidate.formula

    def found(steps: int) -> Bound:
        return bound(formula, partition, time, steps, method="tightest")

    found(1)  # refuses parts that lack a structure
    return ErrorLaw(
        "proven",
        lambda steps: f"{found(steps).theorem}, {found(steps).source}",
        width,
        lambda steps: width * found(steps).value,
    )


def given_law(label: str, law: Callable[[int], float], width: float) -> ErrorLaw:
    """Take a function of the step count from the caller."""

    def rule(steps: int) -> float:
        value = law(steps)
        if isinstance(value, bool) or not isinstance(value, (int, float)) or not value >= 0.0:
            raise ArgumentError(
                f"algorithmic[{label!r}]: gives no error (at {steps} steps {value!r}); return a number, 0 or more",
                argument="algorithmic",
                value=value,
            )
        return float(value)

    words = repr(law) if isinstance(law, PowerLaw) else "given by the caller"
    return ErrorLaw("given", lambda _: words, width, rule)


class Measurements:
    """Measures one observable against a certified reference, and fits laws to that."""

    def __init__(
        self,
        operator: Operator,
        state: State,
        time: float,
        observable: Operator,
        tolerance: float,
        threads: int | None,
        progress: Progress | None,
    ) -> None:
        workers = _threads.resolve(threads)
        watched = {"observable": observable}
        truth = reference_for(operator, state, [time], tolerance, None, watched, threads=workers, progress=progress)
        self._bench = Bench(state, [time], truth, tolerance, "observables", watched, None, "along", workers)
        self._tolerance = tolerance
        self._known: dict[tuple[str, int], Interval] = {}

    def error(self, candidate: Candidate, partition: Partition, steps: int) -> Interval:
        """Return the interval that holds the error at a step count."""
        key = candidate.label, steps
        if key not in self._known:
            self._known[key] = self._bench.measure(candidate, partition, steps).trial.error
        return self._known[key]

    def law(self, candidate: Candidate, partition: Partition, width: float, most_steps: int) -> ErrorLaw:
        """Run 1, 2, 3, 4, 6, … steps until the error is a twentieth of the tolerance; fit a power law to the last ones.

        The law is raised until none of the points that it was fitted to lies above it. Where fewer than three errors stand
        clear of reference and rounding, the error is taken as the largest of the last three upper ends at any count.
        """
        points: list[tuple[int, Interval]] = []
        clear: list[tuple[int, float]] = []
        steps = 1
        while steps <= most_steps:
            low, high = self.error(candidate, partition, steps)
            points.append((steps, (low, high)))
            if low >= 0.5 * high > 0.0:
                clear.append((steps, high))
            elif len(points) >= FEWEST_POINTS:
                break  # reference and rounding hide the rest
            if high <= self._tolerance / 20.0 and len(clear) >= _FEWEST:
                break
            steps = max(steps + 1, int(steps * _GROWTH))
        clear = clear[-_POINTS:]
        if len(clear) < FEWEST_POINTS:
            ceiling = max(high for _, (_, high) in points[-FEWEST_POINTS:])
            told = f"at most {nearest(ceiling)} at {len(points[-FEWEST_POINTS:])} counts up to {points[-1][0]}"
            return ErrorLaw("fitted", lambda _: told, width, lambda _: ceiling)
        law = PowerLaw.fit([count for count, _ in clear], [high for _, high in clear], variable="r", what="error")
        raised = math.exp(max(law.residuals))
        words = (
            f"{nearest(raised * law.prefactor)} r^{nearest(law.exponent)} over {len(clear)} counts from "
            f"{clear[0][0]} to {clear[-1][0]}"
        )
        return ErrorLaw("fitted", lambda _: words, width, lambda steps: raised * law(steps))
