"""The step count that a theorem proves at any size, to stand beside an extrapolation."""

from __future__ import annotations

from trueturn.accuracy import bound
from trueturn.audit.candidate import Candidate
from trueturn.errors import FormulaError
from trueturn.formulas import Formula
from trueturn.operator import Operator
from trueturn.reference.certificate import norm_bound

__all__ = ["proven_steps"]

_MOST_STEPS = 2**53


def proven_steps(
    candidate: Candidate, operator: Operator, time: float, tolerance: float, observables: tuple[Operator, ...]
) -> tuple[int | None, str]:
    """Return the least step count whose proven bound meets the tolerance and its source, or None and the reason.

    For observables |⟨O⟩_S - ⟨O⟩| ≤ 2 ‖O‖ ‖S - U‖, the identity removed; no two circuits are further apart than 2.
    """
    formula = candidate.formula
    if not isinstance(formula, Formula):
        return None, f"no theorem at hand covers {formula.name}"
    largest = max((norm_bound(observable) for observable in observables), default=0.5)
    distance = min(2.0, tolerance / (2.0 * largest)) if largest > 0.0 else 2.0
    partition = candidate.partition(operator)

    def meets(steps: int) -> bool:
        return bound(formula, partition, time, steps).value <= distance

    try:
        found = bound(formula, partition, time, 1)
    except FormulaError:
        return None, f"no theorem at hand covers {formula.name}"
    failing, passing = 0, 1
    while not meets(passing):
        failing, passing = passing, 2 * passing
        if passing > _MOST_STEPS:
            return None, f"{found.theorem} asks for more than {_MOST_STEPS:g} steps"
    while passing - failing > 1:
        middle = (failing + passing) // 2
        failing, passing = (failing, middle) if meets(middle) else (middle, passing)
    return passing, f"{found.theorem}, {found.source}"
