"""The step counts that theorems prove to meet a tolerance."""

from __future__ import annotations

import math

from trueturn.accuracy.bounds import bound
from trueturn.audit.measure import Bench
from trueturn.audit.runs import Runs, error_per_distance
from trueturn.errors import FormulaError
from trueturn.formulas import Formula

__all__ = ["proven_steps"]

MOST_STEPS = 2**53


def distance_for(bench: Bench, error: float) -> float:
    """Return the spectral-norm distance of two circuits within which their errors differ by at most `error`.

    No two circuits are further apart than 2.
    """
    per_distance = error_per_distance(bench)
    return min(2.0, error / per_distance) if per_distance > 0.0 else 2.0


def proven_steps(runs: Runs) -> tuple[int | None, str]:
    """Return the least step count whose proven bound meets the tolerance and its source, or None and the reason.

    The bound is on the circuit in exact arithmetic at the last time: errors at earlier times on the same grid, and at shorter
    times in as many steps, have smaller ones.
    """
    bench, formula = runs.bench, runs.candidate.formula
    if not isinstance(formula, Formula):
        return None, f"no theorem at hand covers {formula.name}"
    distance = distance_for(bench, bench.tolerance)
    unit = bench.step_unit()

    def meets(count: int) -> bool:
        return bound(formula, runs.partition, bench.times[-1], count * unit).value <= distance

    try:
        found = bound(formula, runs.partition, bench.times[-1], unit)
    except FormulaError:
        return None, f"no theorem at hand covers {formula.name}"
    failing, passing = 0, 1
    while not meets(passing):
        failing, passing = passing, 2 * passing
        if passing * unit > MOST_STEPS:
            return None, f"{found.theorem} asks for more than {MOST_STEPS:g} steps"
    while passing - failing > 1:
        middle = (failing + passing) // 2
        failing, passing = (failing, middle) if meets(middle) else (middle, passing)
    return passing * unit, f"{found.theorem}, {found.source}"


def fitted_order(runs: Runs, steps: int) -> float | None:
    """Return how fast the error falls from a step count to the largest that was run, or None where rounding hides it."""
    last = max(runs.measured)
    first, final = (runs.measured[count].trial.error for count in (steps, last))
    if last <= steps or first[0] <= 0.0 or final[0] <= 0.0:
        return None
    return math.log(first[1] / final[1]) / math.log(last / steps)
