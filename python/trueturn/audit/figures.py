"""Writing numbers so that nobody is misled: intervals are rounded outwards, bounds upwards.

The one convention: an error that is known to three digits is printed as one figure (``3.14e-3``); one that is
not is printed as an interval (``3.1e-3 … 3.6e-3``), and one whose lower end is 0 as an upper limit
(``≤ 9.8e-9``).
"""

from __future__ import annotations

import math
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal

__all__ = ["count", "interval", "nearest", "outward", "plain", "upper"]


def rounded(value: float, digits: int, rounding: str) -> str:
    """Write a number with some significant digits, small and large ones in exponent form."""
    if not math.isfinite(value):
        return str(value)
    exact = Decimal(repr(float(value)))
    if exact == 0:
        return "0"
    unit = Decimal(1).scaleb(exact.adjusted() - digits + 1)
    figure = exact.quantize(unit, rounding=rounding)
    exponent = figure.adjusted()
    if -1 <= exponent <= 2:
        return f"{figure:.{max(0, digits - 1 - exponent)}f}"
    return f"{figure.scaleb(-exponent):.{digits - 1}f}e{exponent}"


def upper(value: float, digits: int = 2) -> str:
    """Write a number rounded up.

    Examples
    --------
    >>> upper(0.00912)
    '9.2e-3'
    """
    return rounded(value, digits, ROUND_CEILING)


def nearest(value: float, digits: int = 3) -> str:
    """Write a number rounded to the nearest.

    Examples
    --------
    >>> nearest(0.0031415)
    '3.14e-3'
    """
    return rounded(value, digits, ROUND_HALF_EVEN)


def outward(low: float, high: float, digits: int = 6) -> str:
    """Write an interval that holds another: the lower end rounded down, the upper end up.

    Examples
    --------
    >>> outward(-32.8269999, 22.2)
    '[-32.8270, 22.2000]'
    """
    return f"[{rounded(low, digits, ROUND_FLOOR)}, {upper(high, digits)}]"


def interval(low: float, high: float, tolerance: float | None = None) -> str:
    """Write an error interval compactly, never narrower than it is as far as the digits show.

    Parameters
    ----------
    low, high : float
    tolerance : float, optional
        Where the rounded figure would coincide with the tolerance, more digits are printed.

    Examples
    --------
    >>> interval(0.0031415926, 0.0031415927)
    '3.14e-3'
    >>> interval(0.00312, 0.00356)
    '3.1e-3 … 3.6e-3'
    >>> interval(0.0, 9.71e-9)
    '≤ 9.8e-9'
    """
    if low <= 0:
        return f"≤ {upper(high)}"
    for digits in range(3, 9):
        if nearest(low, digits) != nearest(high, digits):
            break
        figure = nearest(low, digits)
        if tolerance is None or figure != nearest(tolerance, digits) or low == high == tolerance:
            return figure
    for digits in range(2, 9):
        left, right = rounded(low, digits, ROUND_FLOOR), upper(high, digits)
        straddles = tolerance is not None and low <= tolerance <= high
        if straddles or tolerance is None or nearest(tolerance, digits) not in (left, right):
            break
    return f"{left} … {right}"


def plain(value: float) -> str:
    """Write a number of the user's own (a time, a tolerance) as shortly as it can be read back.

    Examples
    --------
    >>> plain(0.01), plain(2.0), plain(1e-10)
    ('0.01', '2', '1e-10')
    """
    for digits in range(1, 18):
        text = f"{value:.{digits}g}"
        if float(text) == value:
            return text.replace("e-0", "e-").replace("e+0", "e").replace("e+", "e")
    return repr(value)


def count(value: int) -> str:
    """Write a count with its thousands apart, by no-break spaces."""
    return f"{value:,}".replace(",", "\u00a0")
