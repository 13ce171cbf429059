"""The step count that a theorem proves at any size, to stand beside an extrapolation."""

from __future__ import annotations

from trueturn.accuracy import bound, steps_by_bound
from trueturn.audit.candidate import Candidate
from trueturn.errors import FormulaError, ToleranceError
from trueturn.operator import Operator
from trueturn.reference.certificate import norm_bound

__all__ = ["proven_steps"]


def proven_steps(
    candidate: Candidate, operator: Operator, time: float, tolerance: float, observables: tuple[Operator, ...]
) -> tuple[int | None, str]:
    """Return the least step count whose proven bound meets the tolerance and its source, or None and the reason.

    For observables |⟨O⟩_S - ⟨O⟩| ≤ 2 ‖O‖ ‖S - U‖, the identity removed; no two circuits are further apart than 2.
    """
    largest = max((norm_bound(observable) for observable in observables), default=0.5)
    distance = min(2.0, tolerance / (2.0 * largest)) if largest > 0.0 else 2.0
    partition = candidate.partition(operator)
    try:
        steps = steps_by_bound(candidate.formula, partition, time, distance)
    except (FormulaError, ToleranceError) as refusal:
        return None, str(refusal)
    found = bound(candidate.formula, partition, time, steps)
    return steps, f"{found.theorem}, {found.source}"
