"""Checks of what callers hand to randomised formulas: a clean value, or an error that names the argument."""

from __future__ import annotations

import math
from numbers import Real
from operator import index
from typing import Any

import numpy as np

from trueturn.errors import ArgumentError, OperatorError
from trueturn.formulas import Formula, formula
from trueturn.operator import Operator
from trueturn.partition import Partition

__all__ = [
    "WRITTEN_OUT_LIMIT",
    "as_int",
    "checked_formula",
    "checked_operator",
    "checked_partition",
    "finite",
    "refuse_long_time",
    "require_size",
    "whole",
]

WRITTEN_OUT_LIMIT = 10**7
"""Rotations in one sample; they do not repeat, so all of them are held in memory."""

MOST = 2**53


def as_int(value: Any) -> Any:
    """Return whole numbers of any make (NumPy's too, not truth values or floats) as int, all else as it is."""
    if isinstance(value, bool | np.bool_):
        return value
    try:
        return index(value)
    except TypeError:
        return value


def whole(argument: str, value: object, least: int, remedy: str) -> int:
    """Return a whole number from `least` to 2**53, of a seed from `least` on; what else counts, see `as_int`."""
    found = as_int(value)
    number: int = found if isinstance(found, int) and not isinstance(found, bool) else least - 1
    if number < least or (number > MOST and argument != "seed"):
        raise ArgumentError(
            f"{argument}: is not a whole number from {least} ({value!r}); {remedy}", argument=argument, value=value
        )
    return number


def finite(argument: str, value: object, remedy: str) -> float:
    """Return a finite float; truth values and complex numbers are refused."""
    number = math.nan
    if isinstance(value, Real) and not isinstance(value, bool):
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
    if not math.isfinite(number):
        raise ArgumentError(f"{argument}: is not a finite number ({value!r}); {remedy}", argument=argument, value=value)
    return number


def checked_formula(given: Formula | str) -> Formula:
    """Return a formula, looked up where its name is given; unknown names are refused by `trueturn.formula`."""
    return given if isinstance(given, Formula) else formula(given)


def checked_partition(given: object) -> Partition:
    """Refuse what is no Partition."""
    if not isinstance(given, Partition):
        raise ArgumentError(
            f"partition: is not a Partition ({given!r}); make one with Partition.of(operator, rule)",
            argument="partition",
            value=given,
        )
    return given


def checked_operator(argument: str, given: object) -> Operator:
    """Refuse what is no Operator."""
    if not isinstance(given, Operator):
        raise OperatorError(
            f"{argument}: is not an Operator ({given!r}); use trueturn.Operator or trueturn.model", argument=argument
        )
    return given


def require_size(argument: str, value: int, rotations: int) -> None:
    """Refuse samples of more rotations than are held in memory."""
    if rotations > WRITTEN_OUT_LIMIT:
        raise ArgumentError(
            f"{argument}: makes too many rotations ({value}: {rotations} in a sample, {WRITTEN_OUT_LIMIT} at most); "
            "samples do not repeat and are written out, so give fewer",
            argument=argument,
            value=value,
        )


def refuse_long_time(time: float) -> ArgumentError:
    """Word the refusal of a time that makes an angle overflow."""
    return ArgumentError(
        f"time: makes an angle too large for a float ({time!r}); use a shorter time or smaller coefficients",
        argument="time",
        value=time,
    )
