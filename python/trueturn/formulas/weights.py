"""Weights as a caller gives them: numbers or printed digits, turned into exact fractions."""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Decimal
from fractions import Fraction
from numbers import Rational, Real
from typing import TypeAlias

from trueturn.errors import FormulaError

__all__ = ["Number", "exact_weights"]

Number: TypeAlias = "float | Fraction | Decimal | str"

SUM_SLACK = 8
"""Weights may miss the sum 1 by 8 u Σ|w|: rounding each explains 1, digits in print the rest."""


def exact_weights(argument: str, values: Sequence[Number], name: str) -> list[Fraction]:
    """Turn numbers or decimal texts into the exact fractions that they are; check that they sum to 1."""
    remedy = "give finite numbers, or decimal digits as text"
    if isinstance(values, str) or not hasattr(values, "__iter__"):
        raise FormulaError(f"{argument}: is not a list of weights ({values!r}); {remedy}", name=name, choices=())
    exact: list[Fraction] = []
    for number, value in enumerate(values):
        wanted = isinstance(value, (Real, Rational, Decimal, str)) and not isinstance(value, bool)
        try:
            if not wanted:
                raise ValueError
            exact.append(Fraction(value if isinstance(value, (Rational, Decimal, str)) else float(value)))
        except (ValueError, OverflowError, ZeroDivisionError):
            raise FormulaError(
                f"{argument}: entry {number} is not a finite number ({value!r}); {remedy}",
                name=name,
                choices=(),
            ) from None
    if not exact:
        raise FormulaError(f"{argument}: is empty ({values!r}); {remedy}", name=name, choices=())
    check_sum(argument, exact, name)
    return exact


def check_sum(argument: str, weights: Sequence[Fraction], name: str) -> None:
    total = sum(weights, Fraction(0))
    if abs(total - 1) > SUM_SLACK * Fraction(2) ** -53 * sum(map(abs, weights)):
        raise FormulaError(
            f"{argument}: do not sum to 1 ({float(total)!r}); divide by the sum, or correct the digits",
            name=name,
            choices=(),
        )
