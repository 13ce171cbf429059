"""The step counts that theorems prove to meet a tolerance."""

from __future__ import annotations

import math

from trueturn.accuracy.bounds import bound, steps_by_bound
from trueturn.audit.measure import Bench
from trueturn.audit.runs import Runs, error_per_distance
from trueturn.errors import FormulaError, ToleranceError

__all__ = ["distance_for", "fitted_order", "proven_steps"]


def distance_for(bench: Bench, error: float) -> float:
    """Return the spectral-norm distance of two circuits within which their errors differ by at most `error`.

    No two circuits are further apart than 2.
    """
    per_distance = error_per_distance(bench)
    return min(2.0, error / per_distance) if per_distance > 0.0 else 2.0


def proven_steps(runs: Runs) -> tuple[int | None, str]:
    """Return the least step count whose proven bound meets the tolerance and its source, or None and the reason.

    The bound is on the circuit in exact arithmetic at the last time: at earlier times on the same grid, and at shorter times in
    as many steps, it is smaller. It falls as steps grow, so the least count that fits the grid is the next one on it.
    """
    bench, formula = runs.bench, runs.candidate.formula
    time, unit = bench.times[-1], bench.step_unit()
    try:
        least = steps_by_bound(formula, runs.partition, time, distance_for(bench, bench.tolerance))
        steps = -(-least // unit) * unit
        found = bound(formula, runs.partition, time, steps)
    except (FormulaError, ToleranceError) as refusal:
        return None, str(refusal)
    return steps, f"{found.theorem}, {found.source}"


def fitted_order(runs: Runs, steps: int) -> float | None:
    """Return how fast the error falls from a step count to the largest that was run, or None where rounding hides it."""
    last = max(runs.measured)
    first, final = (runs.measured[count].trial.error for count in (steps, last))
    if last <= steps or first[0] <= 0.0 or final[0] <= 0.0:
        return None
    return math.log(first[1] / final[1]) / math.log(last / steps)
