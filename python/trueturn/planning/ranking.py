"""Ranks the rows of a plan, and finds what nothing beats: rows by several costs, step counts by error and cost."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from trueturn.audit.result import Interval
from trueturn.comparison.result import efficient
from trueturn.planning.result import FrontPoint, PlanRow

__all__ = ["front", "marked", "ranked"]

_CLASSES = ("meets", "undecided", "misses")


def ranked(rows: Sequence[PlanRow], cost: Sequence[str]) -> list[PlanRow]:
    """Return the rows in the order of their rank; equals stay in the given order."""

    def key(row: PlanRow) -> tuple[int, tuple[float, ...]]:
        place = _CLASSES.index(row.verdict)
        if place:
            return place, (row.error[1],)
        return -int(row.room), (
            *(row.costs[name] for name in cost),
            row.costs["two_qubit_gates"],
            row.costs["rotations"],
        )

    return sorted(rows, key=key)


def marked(rows: Sequence[PlanRow], compared: Sequence[str]) -> list[PlanRow]:
    """Mark the rows that meet and that no other such row beats: at most as costly in all compared costs, less in one."""

    def beats(one: Mapping[str, float], other: Mapping[str, float]) -> bool:
        return all(one[name] <= other[name] for name in compared) and any(one[name] < other[name] for name in compared)

    meeting = [row for row in rows if row.verdict == "meets"]
    return [
        replace(row, efficient=row.verdict == "meets" and not any(beats(other.costs, row.costs) for other in meeting))
        for row in rows
    ]


def front(rows: Sequence[PlanRow]) -> tuple[FrontPoint, ...]:
    """Return the step counts of all ranked rows that nothing beats in error and cost, ascending in cost.

    Of equal points the one of the best ranked row stands for all.
    """
    points: dict[tuple[float, Interval], tuple[int, int]] = {}
    for number, row in enumerate(rows):
        for trial, cost in zip(row.trials, row.trial_costs, strict=True):
            points.setdefault((cost, trial.error), (number, trial.steps))
    marks = efficient(list(points))
    found = [
        FrontPoint(number, rows[number].label, steps, cost, error, certain)
        for ((cost, error), (number, steps)), (on_front, certain) in zip(points.items(), marks, strict=True)
        if on_front
    ]
    return tuple(sorted(found, key=lambda point: point.cost))
