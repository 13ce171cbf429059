"""Times on the grid of a circuit that is read on the way."""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

from trueturn.errors import AuditError

__all__ = ["grid_unit", "steps_at"]

_FINEST = 10_000
_SLACK = 1e-12


def grid_unit(times: Sequence[float]) -> int:
    """Return the least step count whose equal steps to the last time meet every time; its multiples do too.

    Parameters
    ----------
    times : sequence of float
        Ascending, positive.

    Raises
    ------
    AuditError
        The times have no common grid of at most 10000 steps.
    """
    last = times[-1]
    unit = 1
    for time in times:
        ratio = Fraction(time / last).limit_denominator(_FINEST)
        if abs(float(ratio) - time / last) > _SLACK:
            unit = _FINEST + 1
            break
        unit = math.lcm(unit, ratio.denominator)
    if unit > _FINEST:
        raise AuditError(
            f"times: have no common grid of at most {_FINEST} steps ({', '.join(f'{time:g}' for time in times)}); "
            'use times on a grid, or readout="separate"',
            reason="no common grid",
            limit=_FINEST,
        )
    return unit


def steps_at(times: Sequence[float], steps: int) -> list[int]:
    """Return after how many of `steps` equal steps to the last time each time is reached.

    Raises
    ------
    AuditError
        A time falls between steps; the message lists counts that fit.
    """
    unit = grid_unit(times)
    if steps % unit:
        below, above = steps // unit * unit, (steps // unit + 1) * unit
        fitting = [count for count in (below - unit, below, above, above + unit) if count > 0]
        raise AuditError(
            f"steps: {steps} steps to time {times[-1]:g} do not meet every requested time; "
            f"multiples of {unit} do, such as {', '.join(map(str, fitting))}",
            reason="times off the grid",
            limit=unit,
        )
    return [round(time / times[-1] * steps) for time in times]
