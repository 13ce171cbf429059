"""What a fit accepts: each check returns the argument in its one form, or refuses it."""

from __future__ import annotations

import math
from collections.abc import Iterable
from numbers import Real
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from trueturn.errors import ArgumentError

__all__ = ["FEWEST_POINTS", "Floats", "level", "listed", "number", "points", "positive"]

FEWEST_POINTS = 3
"""Two points always lie on a power law; the third is the first that can contradict it."""

Floats: TypeAlias = npt.NDArray[np.float64]


def points(sizes: Iterable[float], values: Iterable[float]) -> tuple[Floats, Floats]:
    """Return sizes and values as arrays of one length, with enough different sizes for a fit."""
    x, y = listed("sizes", sizes), listed("values", values)
    if len(x) != len(y):
        raise ArgumentError(
            f"values: {len(y)} for {len(x)} sizes; give one value for each size", argument="values", value=len(y)
        )
    if len(set(x)) < FEWEST_POINTS:
        raise ArgumentError(
            f"sizes: too few points for a fit ({len(set(x))} different ones); give at least {FEWEST_POINTS}, better 5 or more",
            argument="sizes",
            value=len(set(x)),
        )
    return np.array(x), np.array(y)


def listed(argument: str, values: Iterable[float]) -> list[float]:
    """Return a list of numbers above zero."""
    try:
        if isinstance(values, (str, bytes)):
            raise TypeError
        entries = list(values)
    except TypeError:
        raise ArgumentError(
            f"{argument}: no list of numbers ({values!r}); give one number for each point",
            argument=argument,
            value=values,
        ) from None
    return [positive(argument, entry) for entry in entries]


def number(argument: str, value: object) -> float:
    """Return a finite real number."""
    if isinstance(value, (Real, np.number)) and not isinstance(value, (bool, complex, np.complexfloating)):
        try:
            found = float(value)
        except OverflowError:
            found = math.inf
        if math.isfinite(found):
            return found
    raise ArgumentError(f"{argument}: not a finite number ({value!r}); give one", argument=argument, value=value)


def positive(argument: str, value: object) -> float:
    """Return a number above zero."""
    found = number(argument, value)
    if found <= 0.0:
        raise ArgumentError(
            f"{argument}: not above zero ({value!r}); a power law needs positive numbers",
            argument=argument,
            value=value,
        )
    return found


def level(given: object) -> float:
    """Return a confidence level."""
    found = number("level", given)
    if not 0.0 < found < 1.0:
        raise ArgumentError(
            f"level: not between 0 and 1 ({given!r}); give a confidence level, such as 0.95",
            argument="level",
            value=given,
        )
    return found
