"""Ranks the rows of a plan, and finds what nothing beats: rows by several costs, step counts by error and cost."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from trueturn.audit.result import Interval
from trueturn.comparison.result import efficient
from trueturn.planning.result import FrontPoint, PlanRow

__all__ = ["front", "ranked", "undominated"]

Priced = tuple[int, float, Interval]
"""A step count with its cost and error."""

_CLASSES = ("meets", "undecided", "misses")


def ranked(rows: Sequence[PlanRow], cost: Sequence[str]) -> list[int]:
    """Return the numbers of the rows in the order of their rank; equals stay in the given order."""

    def key(number: int) -> tuple[int, tuple[float, ...]]:
        row = rows[number]
        place = _CLASSES.index(row.verdict)
        if place:
            return place, (row.error[1],)
        return place, (*(row.costs[name] for name in cost), row.costs["two_qubit_gates"], row.costs["rotations"])

    return sorted(range(len(rows)), key=key)


def undominated(costs: Sequence[Mapping[str, float]], compared: Sequence[str]) -> list[bool]:
    """Tell for each entry whether no other is at most as costly in every compared cost and less so in one."""

    def beats(one: Mapping[str, float], other: Mapping[str, float]) -> bool:
        return all(one[name] <= other[name] for name in compared) and any(one[name] < other[name] for name in compared)

    return [not any(beats(other, entry) for other in costs) for entry in costs]


def front(labels: Sequence[str], runs: Sequence[Sequence[Priced]]) -> tuple[FrontPoint, ...]:
    """Return the step counts of all rows that nothing beats in error and cost, ascending in cost.

    `runs` holds those of each row; of equal ones the first stands for all.
    """
    points: dict[tuple[float, Interval], tuple[int, int]] = {}
    for number, priced in enumerate(runs):
        for steps, cost, error in priced:
            points.setdefault((cost, error), (number, steps))
    marks = efficient(list(points))
    found = [
        FrontPoint(number, labels[number], steps, cost, error, certain)
        for ((cost, error), (number, steps)), (on_front, certain) in zip(points.items(), marks, strict=True)
        if on_front
    ]
    return tuple(sorted(found, key=lambda point: point.cost))
