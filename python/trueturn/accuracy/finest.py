"""A reference as fine as double precision certifies."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping

from trueturn.errors import ToleranceError
from trueturn.operator import Operator
from trueturn.reference import Reference, reference
from trueturn.state import State

__all__ = ["FINEST", "finest_reference"]

FINEST = 1e-12
"""Asked for first; a longer evolution certifies less."""


def finest_reference(
    operator: Operator,
    state: State,
    times: float | Iterable[float],
    observables: Mapping[str, Operator],
    *,
    keep: str = "last",
    threads: int,
) -> Reference:
    """Return a reference certified to `FINEST`, or to what can be certified.

    Raises
    ------
    ToleranceError
        Nothing can.
    """
    try:
        return reference(operator, state, times, FINEST, observables, keep=keep, threads=threads)
    except ToleranceError as refusal:
        if not math.isfinite(refusal.achievable):
            raise
        return reference(operator, state, times, refusal.achievable, observables, keep=keep, threads=threads)
