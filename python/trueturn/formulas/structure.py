"""Structures that some sets of coefficients lean on, and the check that a partition has one.

A set that was solved for fewer order conditions, because its field of use makes some commutators vanish or
small, loses order on general operators. Such a set carries `requires`, one of the texts here, and makes no
circuit for a partition without that structure.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

from trueturn.errors import FormulaError
from trueturn.partition import Partition

if TYPE_CHECKING:
    from trueturn.formulas.base import Formula

__all__ = ["NEAR_INTEGRABLE", "NYSTROM", "require_known", "require_nothing", "require_structure"]

NYSTROM = "two parts A, B with [A, [A, [A, B]]] = 0"
"""Runge-Kutta-Nyström sets: A a potential and B a kinetic energy quadratic in momentum.

On qubits only commuting parts have it. The map B -> [A, B] is Hermitian for the inner product tr(X† Y), so
where its third power sends B to zero, so does its first.
"""

SMALL = 0.1

NEAR_INTEGRABLE = "two parts A, B with the sum of |coefficients| of B at most a tenth of that of A"
"""Sets for perturbed systems A + εB, made to shrink the error that is of first order in ε. The tenth is ours:
the literature says "small"."""


def _nystrom(partition: Partition) -> bool:
    return len(partition.parts) == 2 and partition.parts[0].bracket_vanishes(partition.parts[1])


def _near_integrable(partition: Partition) -> bool:
    if len(partition.parts) != 2:
        return False
    large, small = partition.parts
    return small.one_norm() <= SMALL * large.one_norm()


_CHECKS: dict[str, Callable[[Partition], bool]] = {NYSTROM: _nystrom, NEAR_INTEGRABLE: _near_integrable}


def require_known(requires: object, name: str) -> None:
    """Refuse a requirement that nobody can check."""
    if requires != "" and requires not in _CHECKS:
        raise FormulaError(
            f"requires: is no structure that can be checked ({requires!r}); leave it empty, or choose one of: "
            + "; ".join(_CHECKS),
            name=name,
            choices=tuple(_CHECKS),
        )


def require_structure(formula: Formula, partition: Partition) -> None:
    """Refuse a partition that lacks what a formula requires."""
    if formula.requires and not _CHECKS[formula.requires](partition):
        raise FormulaError(
            f"partition: lacks what {formula.name} requires ({formula.requires}; here {len(partition.parts)} parts), "
            f"and without it the order is only {formula.order}; choose a formula that requires nothing",
            name=formula.name,
            choices=(),
        )


def require_nothing(formula: Formula, where: str) -> None:
    """Refuse a formula that requires any structure, `where` parts are not those of one fixed partition."""
    if formula.requires:
        raise FormulaError(
            f"formula: {formula.name} requires {formula.requires}, and {where}; choose a formula that requires nothing",
            name=formula.name,
            choices=(),
        )
