"""Where a function of the step count is least, with few evaluations."""

from __future__ import annotations

from collections.abc import Callable

__all__ = ["least_at"]

_GROWTH = 1.2


def least_at(value: Callable[[int], float], floor: Callable[[int], float], most: int) -> int:
    """Return the step count from 1 to `most` at which `value` is least.

    Parameters
    ----------
    value : callable
        Falls and then rises (it may be level before it falls), as c r^-p + g r does. Otherwise a local minimum may come
        back.
    floor : callable
        A lower bound on `value` that never falls: once it reaches the least value found, all larger counts are worse.
    most : int

    Notes
    -----
    A coarse walk brackets the minimum, thirds narrow the bracket: some 60 evaluations for counts up to a million.
    """
    known: dict[int, float] = {}

    def at(steps: int) -> float:
        if steps not in known:
            known[steps] = value(steps)
        return known[steps]

    walked = [1]
    best = 1
    while True:
        if at(walked[-1]) < at(best):
            best = walked[-1]
        if walked[-1] >= most or floor(walked[-1]) >= at(best):
            break
        walked.append(min(most, max(walked[-1] + 1, int(walked[-1] * _GROWTH))))
    place = walked.index(best)
    low, high = walked[max(0, place - 1)], walked[min(len(walked) - 1, place + 1)]
    while high - low > 3:
        third = (high - low) // 3
        if at(low + third) <= at(high - third):
            high -= third
        else:
            low += third
    found: int = min([*range(low, high + 1), best], key=lambda steps: (at(steps), steps))
    return found
