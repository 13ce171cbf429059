"""The reference that a verdict needs, and the times it is asked at."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping, Sequence

from trueturn.errors import ArgumentError, ToleranceError
from trueturn.operator import Operator
from trueturn.reference import Reference, reference
from trueturn.state import State

__all__ = ["positive_times", "reference_for"]

Progress = Callable[[str, float, float], object]


def positive_times(times: float | Iterable[float]) -> list[float]:
    """Return the times as floats, in the order given.

    Raises
    ------
    ArgumentError
        They are not positive, finite numbers, or there are none.
    """
    try:
        if isinstance(times, str):
            raise TypeError
        single = not isinstance(times, Iterable) or getattr(times, "ndim", None) == 0
        found = [float(time) for time in ([times] if single else times)]  # type: ignore[arg-type, union-attr]
    except (TypeError, ValueError):
        found = []
    if not found or not all(0.0 < time < math.inf for time in found):
        raise ArgumentError(
            f"times: not positive and finite ({times!r}); give at least one time above 0", argument="times", value=times
        )
    return found


def reference_for(
    operator: Operator,
    state: State,
    times: Sequence[float],
    tolerance: float,
    asked: float | None,
    observables: Mapping[str, Operator],
    *,
    method: str = "chebyshev",
    keep: str = "last",
    threads: int,
    progress: Progress | None,
) -> Reference:
    """Return a reference fine enough to judge errors against `tolerance`.

    Certified to `asked`, or where that is None to 1e-10 or a hundredth of the tolerance, whichever is less; where double
    precision cannot certify so much but can certify a hundredth of the tolerance, to what it can.

    Raises
    ------
    ToleranceError
        Not even a hundredth of the tolerance can be certified; or not what was asked.
    """

    def certified(limit: float) -> Reference:
        return reference(operator, state, times, limit, observables, method, keep, progress, threads=threads)

    if asked is not None:
        try:
            return certified(asked)
        except ToleranceError as refusal:
            raise ToleranceError(
                f"reference_{refusal}", tolerance=refusal.tolerance, achievable=refusal.achievable
            ) from None
    try:
        return certified(min(1e-10, tolerance / 100.0))
    except ToleranceError as refusal:
        if refusal.achievable <= tolerance / 100.0:
            return certified(refusal.achievable)
        if not math.isfinite(refusal.achievable):
            raise
        raise ToleranceError(
            f"tolerance: cannot be judged in double precision ({tolerance:g}): the reference can be certified to "
            f"{refusal.achievable:g} here, and a hundredth of the tolerance is needed; ask for "
            f"{100.0 * refusal.achievable:.3g} or more, or a shorter time",
            tolerance=tolerance,
            achievable=100.0 * refusal.achievable,
        ) from None
