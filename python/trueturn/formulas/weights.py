"""Weights as a caller gives them: numbers or printed digits, turned into exact fractions."""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Decimal
from fractions import Fraction
from numbers import Rational, Real
from typing import Literal, TypeAlias

from trueturn.errors import FormulaError

__all__ = ["DIRECTIONS", "Direction", "ExactStage", "Number", "composed", "exact_weights", "split"]

Number: TypeAlias = "float | Fraction | Decimal | str"
Direction: TypeAlias = Literal["forward", "reverse"]
ExactStage: TypeAlias = tuple[Fraction, Direction]

DIRECTIONS: tuple[Direction, Direction] = ("forward", "reverse")

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


def composed(weights: Sequence[Number], name: str) -> list[ExactStage]:
    """List the stages of a composition of Strang steps, exactly."""
    halves = [weight / 2 for weight in exact_weights("weights", weights, name)]
    return [(half, direction) for half in halves for direction in DIRECTIONS]


def split(a: Sequence[Number], b: Sequence[Number], name: str) -> list[ExactStage]:
    """List the stages of a splitting method for two operators, exactly; stages of weight zero are left out."""
    a_exact, b_exact = exact_weights("a", a, name), exact_weights("b", b, name)
    if len(a_exact) - len(b_exact) not in (0, 1):
        raise FormulaError(
            f"a, b: do not fit in length ({len(a_exact)}, {len(b_exact)}); give as many, or one a more",
            name=name,
            choices=(),
        )
    exponents = [value for pair in zip(a_exact, b_exact, strict=False) for value in pair]
    exponents += a_exact[len(b_exact) :]
    weights: list[Fraction] = []
    for exponent in exponents[:-1]:
        weights.append(exponent - (weights[-1] if weights else 0))
    half = len(weights) // 2
    if exponents == exponents[::-1]:  # keep the symmetry exact where sums miss 1 in the last digit
        weights[len(weights) - half :] = weights[:half][::-1]
    return [(weight, DIRECTIONS[number % 2]) for number, weight in enumerate(weights) if weight]
