"""Weights as a caller gives them: numbers or printed digits, turned into exact fractions."""

from __future__ import annotations

import math
import re
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


MOST_WEIGHT = 10**100
"""Rounding such weights to floats leaves nothing of a sum of 1, and sums of them are still floats."""

_EXPONENT = re.compile(r"e[+-]?0*([0-9_]+)\s*", re.IGNORECASE)
_MOST_DIGITS = 3  # of an exponent; the exact fraction of one of seven takes seconds


def _exact(value: object) -> Fraction:
    """Turn one number or text into a fraction; a ValueError where it is none or its exponent is beyond all floats."""
    if not isinstance(value, (Real, Rational, Decimal, str)) or isinstance(value, bool):
        raise ValueError
    if isinstance(value, str) and (found := _EXPONENT.search(value)) and len(found[1]) > _MOST_DIGITS:
        raise ValueError
    if isinstance(value, Decimal) and value.is_finite() and len(str(abs(value.adjusted()))) > _MOST_DIGITS:
        raise ValueError
    exact = Fraction(value if isinstance(value, (Rational, Decimal, str)) else float(value))
    if abs(exact) > MOST_WEIGHT:
        raise OverflowError
    return exact


def shown(value: object) -> str:
    """Write a value for a message, cut to sixty characters."""
    try:
        text = repr(value)
    except ValueError:  # an integer of more digits than Python writes
        return "an integer of thousands of digits"
    return text if len(text) <= 60 else text[:59] + "…"


def exact_weights(argument: str, values: Sequence[Number], name: str) -> list[Fraction]:
    """Turn numbers or decimal texts into the exact fractions that they are; check that they sum to 1."""
    remedy = "give finite numbers, or decimal digits as text"
    if isinstance(values, str) or not hasattr(values, "__iter__"):
        raise FormulaError(f"{argument}: is not a list of weights ({values!r}); {remedy}", name=name, choices=())
    exact: list[Fraction] = []
    for number, value in enumerate(values):
        try:
            exact.append(_exact(value))
        except OverflowError:
            infinite = isinstance(value, (float, Decimal)) and not math.isfinite(value)
            what = "not a finite number" if infinite else "above 1e100 in size"
            raise FormulaError(
                f"{argument}: entry {number} is {what} ({shown(value)}); {remedy}", name=name, choices=()
            ) from None
        except (ValueError, ZeroDivisionError):
            raise FormulaError(
                f"{argument}: entry {number} is not a finite number ({shown(value)}); {remedy}",
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
