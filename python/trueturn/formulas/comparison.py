"""Which formula is best for which error, and what a step costs on a given Hamiltonian."""

from __future__ import annotations

import math
from collections.abc import Sequence

from trueturn.errors import FormulaError
from trueturn.formulas.base import Formula
from trueturn.partition import Partition

__all__ = ["ERRORS", "best_for", "rotations_per_step", "span", "three_digits"]

ERRORS = tuple(10.0**-k for k in range(1, 13))
"""Errors in unit time at which formulas are compared: 0.1 down to 1e-12."""


def best_for(formulas: Sequence[Formula]) -> dict[str, tuple[float, ...]]:
    """Say for which of `ERRORS` each formula needs the fewest exponentials.

    A formula with an entry is on the efficiency front of those given; the others are beaten everywhere. Formulas
    that require a structure take no part. See `Formula.exponentials_for` for what is counted.

    Examples
    --------
    >>> import trueturn as tt
    >>> best_for([tt.formula("strang"), tt.formula("triple-jump-4")])["strang"][0]
    0.1
    """
    won: dict[str, list[float]] = {}
    for error in ERRORS:
        general = [one for one in formulas if not one.requires]
        if general:
            won.setdefault(min(general, key=lambda one: one.exponentials_for(error)).name, []).append(error)
    return {name: tuple(errors) for name, errors in won.items()}


def span(errors: Sequence[float]) -> str:
    """Write neighbouring errors as a range.

    Examples
    --------
    >>> span((1e-3, 1e-4)), span((0.1,)), span(())
    ('1e-3 … 1e-4', '1e-1', '')
    """
    ends = [f"1e-{round(-math.log10(error))}" for error in errors]
    return "" if not ends else ends[0] if len(ends) == 1 else f"{ends[0]} … {ends[-1]}"


def three_digits(value: float) -> str:
    """Write a number above 0.1 to three digits, or to units where that is more.

    Examples
    --------
    >>> three_digits(1.2), three_digits(34.567), three_digits(1234.5)
    ('1.20', '34.6', '1234')
    """
    return f"{value:.2f}" if value < 9.995 else f"{value:.1f}" if value < 99.95 else f"{value:.0f}"


def rotations_per_step(formula: Formula, partition: Partition) -> int | None:
    """Count the rotations that one more step adds to a long circuit; None where the formula is refused.

    Examples
    --------
    >>> import trueturn as tt
    >>> partition = tt.Partition.of(tt.Operator("Z_0 Z_1 + 0.5 X_0 + 0.5 X_1"), "commuting")
    >>> rotations_per_step(tt.formula("strang"), partition)
    3
    """
    try:
        return formula.rotations(partition, 1.0, 4).count - formula.rotations(partition, 1.0, 3).count
    except FormulaError:
        return None
