"""What a comparison found: points of cost and error, and which of them nothing beats."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from trueturn.errors import ArgumentError

if TYPE_CHECKING:
    from trueturn.reference import Reference

__all__ = ["Comparison", "Point", "efficient", "unit_words"]

Interval = tuple[float, float]


@dataclass(frozen=True)
class Point:
    """One formula at one step count.

    Attributes
    ----------
    formula : str
    steps : int
    cost : int
        In the unit of the comparison; at most the budget.
    error : (float, float)
        Interval that holds the true error.
    budgets : tuple of int
        The budgets for which this is the formula's largest step count that fits.
    on_front : bool
        No other point is as cheap with a smaller upper end of the error, or cheaper with one as small.
    certain : bool
        On the front whatever the true errors are within their intervals.
    """

    formula: str
    steps: int
    cost: int
    error: Interval
    budgets: tuple[int, ...]
    on_front: bool = False
    certain: bool = False


@dataclass(frozen=True, repr=False)
class Comparison:
    """Formulas measured at equal cost; made by `compare`.

    Attributes
    ----------
    points : tuple of Point
        Formula by formula as asked, by ascending cost.
    formulas : tuple of str
        Those with at least one point.
    budgets : tuple of int
        Ascending.
    cost : "two_qubit_gates" or "rotations"
        What the budgets count.
    rule : str
    time : float
    quantity : "observables" or "state"
    least : mapping of str to int
        What one step of each formula costs.
    left_out : mapping of str to str
        Formulas that were not asked for by name and could not be run, with the reason.
    reference : Reference
    """

    points: tuple[Point, ...]
    formulas: tuple[str, ...]
    budgets: tuple[int, ...]
    cost: str
    rule: str
    time: float
    quantity: str
    least: Mapping[str, int]
    left_out: Mapping[str, str]
    reference: Reference

    @property
    def front(self) -> tuple[Point, ...]:
        """The efficient points, by ascending cost: each better than all that cost as much or less."""
        return tuple(sorted((point for point in self.points if point.on_front), key=lambda point: point.cost))

    def at_budget(self, budget: int) -> tuple[Point, ...]:
        """Rank the formulas at one budget: by the upper end of the error, then by cost.

        Raises
        ------
        ArgumentError
            `budget` is not one of `budgets`.
        """
        if budget not in self.budgets:
            raise ArgumentError(
                f"budget: was not compared ({budget!r}); give one of {', '.join(map(str, self.budgets))}",
                argument="budget",
                value=budget,
            )
        found = [point for point in self.points if budget in point.budgets]
        return tuple(sorted(found, key=lambda point: (point.error[1], point.cost)))

    def at_accuracy(self, accuracy: float) -> tuple[Point, ...]:
        """Rank the formulas at one accuracy: the cheapest point of each whose error is surely at most `accuracy`.

        Returns
        -------
        tuple of Point
            By ascending cost, then by the upper end of the error; empty where no point is that good.

        Raises
        ------
        ArgumentError
            `accuracy` is not a positive number.

        Notes
        -----
        Only measured points count: nothing is interpolated between budgets, so costs are as fine as the budgets are.
        """
        number = isinstance(accuracy, (int, float)) and not isinstance(accuracy, bool)
        if not number or not 0.0 < accuracy < math.inf:
            raise ArgumentError(
                f"accuracy: not a positive number ({accuracy!r}); give an error, such as 1e-3",
                argument="accuracy",
                value=accuracy,
            )
        cheapest: dict[str, Point] = {}
        for point in self.points:
            known = cheapest.get(point.formula)
            if point.error[1] <= accuracy and (known is None or point.cost < known.cost):
                cheapest[point.formula] = point
        return tuple(sorted(cheapest.values(), key=lambda point: (point.cost, point.error[1])))

    def table(self) -> str:
        """Write errors by formula and budget, and the winners by accuracy, in at most 80 columns."""
        from trueturn.comparison.table import written

        return written(self)

    def plot(self, path: str | Path) -> Path:
        """Draw error against cost, both logarithmic, with the efficient points filled, and write the picture.

        Parameters
        ----------
        path : str or Path
            Ends in ``.svg``, ``.png`` or ``.pdf``.

        Returns
        -------
        Path

        Raises
        ------
        ArgumentError
            Another ending.

        Notes
        -----
        The same bytes for the same comparison as SVG. Formulas without an efficient point are thin and grey where there
        are more than eight in all.
        """
        from trueturn.comparison.picture import drawn

        return drawn(self, Path(path))

    def __repr__(self) -> str:
        return self.table()


def unit_words(cost: str) -> str:
    """Name in words what budgets count."""
    return {"two_qubit_gates": "two-qubit gates"}.get(cost, cost)


def efficient(points: Sequence[tuple[float, Interval]]) -> list[tuple[bool, bool]]:
    """Tell for each (cost, error interval) whether it is on the front, and whether it surely is.

    Notes
    -----
    A point is beaten where another has cost and upper end no larger, and one of them smaller. It is surely efficient
    where it is efficient for every choice of true errors within the intervals: every other point that costs less has a
    lower end above its upper end, and so has every other of the same cost, or ends touch.
    """
    found = []
    for place, (cost, (_, high)) in enumerate(points):
        others = [other for number, other in enumerate(points) if number != place]
        beaten = any(c <= cost and h <= high and (c < cost or h < high) for c, (_, h) in others)
        rivals = [low for c, (low, _) in others if c < cost]
        equals = [low for c, (low, _) in others if c == cost]
        sure = all(low > high for low in rivals) and all(low >= high for low in equals)
        found.append((not beaten, not beaten and sure))
    return found
