"""The least step count that a theorem proves to be enough, and where it comes from, or why there is none."""

from __future__ import annotations

from trueturn.accuracy.bounds import TIGHTEST, bound, least_steps
from trueturn.errors import FormulaError, ToleranceError
from trueturn.formulas import Formula
from trueturn.formulas.processed import Processed
from trueturn.partition import Partition

__all__ = ["allowed_distance", "proven_steps"]


def allowed_distance(error: float, per_distance: float) -> float:
    """Return how far a circuit may be from exp(-iHt) in the spectral norm for an error of `error` at most.

    Parameters
    ----------
    error : float
    per_distance : float
        The error is at most this times the distance: 1 for states and operators, 2 ‖O‖ for the expectation of O, the
        identity removed.

    Returns
    -------
    float
        At most 2: no two unitary matrices are further apart.
    """
    return min(2.0, error / per_distance) if per_distance > 0.0 else 2.0


def proven_steps(
    formula: Formula | Processed,
    partition: Partition,
    time: float,
    tolerance: float,
    per_distance: float,
    unit: int = 1,
    inputs: str = "worst",
) -> tuple[int | None, str]:
    """Return the least multiple of `unit` steps whose tightest bound meets a tolerance and its source, or None and the reason.

    This is the one proven count of the package: `trueturn bound`, plans and extrapolations give it. The bound is on the
    circuit in exact arithmetic at the last time: at earlier times on the same grid, and at shorter times in as many steps, it
    is smaller. It falls as steps grow, so the least count that fits the grid is the next one on it.

    Parameters
    ----------
    formula, partition, time, inputs
        As for `bound`.
    tolerance : float
        On the error, which is at most `per_distance` times the distance of the circuit from exp(-iHt).
    per_distance : float
    unit : int
    """
    if allowed_distance(tolerance, per_distance) >= 2.0:
        return unit, "no two unitary matrices are further than 2 apart"
    try:
        least = least_steps(formula, partition, time, tolerance, per_distance, method=TIGHTEST, inputs=inputs)
        steps = -(-least // unit) * unit
        found = bound(formula, partition, time, steps, method=TIGHTEST, inputs=inputs)
    except (FormulaError, ToleranceError) as refusal:
        return None, str(refusal)
    return steps, f"{found.theorem}, {found.source}"
