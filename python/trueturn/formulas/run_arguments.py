"""Checks of the time and the step count of a run."""

from __future__ import annotations

import math
from numbers import Real
from operator import index

from trueturn.errors import ArgumentError

__all__ = ["checked_steps", "checked_time"]

MOST_STEPS = 2**53


def checked_time(time: object) -> float:
    """Return a finite time."""
    if isinstance(time, Real) and not isinstance(time, bool):
        try:
            number = float(time)
        except OverflowError:
            number = math.inf
        if math.isfinite(number):
            return number
    raise ArgumentError(
        f"time: is not a finite number ({time!r}); give a real number, negative to run backwards",
        argument="time",
        value=time,
    )


def checked_steps(steps: object) -> int:
    """Return a step count from 1 to 2**53."""
    try:
        if isinstance(steps, bool):
            raise TypeError
        number = index(steps)  # type: ignore[arg-type]
    except TypeError:
        number = 0
    if not 1 <= number <= MOST_STEPS:
        raise ArgumentError(
            f"steps: is not an integer from 1 to 2**53 ({steps!r}); give a number of equal steps, such as 10",
            argument="steps",
            value=steps,
        )
    return number
