"""Checks of the numbers that a drive is made of: a clean value, or an error that names the argument."""

from __future__ import annotations

import math
import operator
from collections.abc import Iterable
from numbers import Real
from typing import NoReturn

from trueturn.errors import ArgumentError

__all__ = ["interval", "number", "numbers", "refuse", "whole"]


def refuse(argument: str, what: str, value: object, remedy: str) -> NoReturn:
    """Raise the error of a bad argument; an index behind the argument's name is for the message only."""
    raise ArgumentError(f"{argument}: {what} ({value!r}); {remedy}", argument=argument.partition("[")[0], value=value)


def number(argument: str, value: object) -> float:
    """Return a finite float; booleans and complex numbers are refused."""
    found = math.nan
    if isinstance(value, Real) and not isinstance(value, bool):
        try:
            found = float(value)
        except OverflowError:
            found = math.inf
    if not math.isfinite(found):
        refuse(argument, "is not a finite real number", value, "give one")
    return found


def numbers(argument: str, values: object) -> list[float]:
    """Return finite floats."""
    if isinstance(values, str) or not isinstance(values, Iterable):
        refuse(argument, "is not a sequence of numbers", values, "give finite real numbers")
    return [number(f"{argument}[{place}]", value) for place, value in enumerate(values)]


def whole(argument: str, value: object, least: int) -> int:
    """Return an integer of at least `least`."""
    try:
        if isinstance(value, bool):
            raise TypeError
        found = operator.index(value)  # type: ignore[arg-type]
    except TypeError:
        found = least - 1
    if found < least:
        refuse(argument, f"is not a whole number from {least}", value, "give one")
    return found


def interval(domain: object) -> tuple[float, float]:
    """Return (low, high), low below high; infinite ends are allowed."""
    low = high = math.nan
    try:
        ends: list[float] = [float(end) for end in domain]  # type: ignore[attr-defined]
        low, high = ends
    except (TypeError, ValueError):
        pass
    if not low < high:
        refuse("domain", "is no interval", domain, "give (low, high) with low below high")
    return low, high
