"""Orders of parts with a small leading error, found by local search.

All orders are tried where that is affordable. Otherwise the search starts from the given order, moves one part
or exchanges two as long as that helps, in an order of trials drawn from the seed, and starts again from
random orders until the allowance is used up. The best order seen is kept; the given one is among them, so the
figure never rises. The figure is a sum over coefficients and no norm, so on few qubits one real step is measured
too, and an order that makes it worse is passed over for the next best.
"""

from __future__ import annotations

import itertools
import math
import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from trueturn.errors import ArgumentError, FormulaError, OperatorError
from trueturn.leading_error import KINDS, LeadingError
from trueturn.operator import Operator

if TYPE_CHECKING:
    from trueturn.formulas import Formula
    from trueturn.partition import Partition

__all__ = ["EVALUATIONS", "Improved", "Search", "improve", "search"]

EVALUATIONS = 2000
"""Orders that a search looks at by default."""

MOST_MEASURED_QUBITS = 10
"""Qubits above which no real step is measured: matrices of 16 MiB, some seconds."""

MOST_MEASURED = 16
"""Orders of smaller figure that are measured until one is not worse than the given one."""

FIGURES = {
    "norm": ("sum of |coefficients|", "spectral norm"),
    "rms": ("root mean square", "root mean square"),
    "observable": ("sum of |coefficients| for the observable", "observable in random states"),
}
"""What is computed of the leading error, and what is measured on a real step."""

_GAIN = 1.0 - 1e-12  # less is rounding
Figure = Callable[[Sequence[int]], float]


@dataclass(frozen=True)
class Improved:
    """A partition in a better order, and what the search measured.

    Attributes
    ----------
    partition : Partition
        The parts in the best order found; the given order where none is better.
    before, after : float
        Figure of the leading error for the given and for the new order, in units of energy times (energy ×
        time)^p for order p; multiply by t τ^p for a run of time t in steps of τ. An estimate, not a bound:
        higher orders in τ are left out.
    figure : str
        What `before` and `after` are: ``"norm"`` or ``"observable"``, the sum of |coefficients|, which only bounds
        the norm; ``"rms"``, the root of the sum of squares.
    order : tuple of int
        Part ``order[k]`` of the given partition is part k of the new one.
    evaluations : int
        Orders that were looked at.
    exhaustive : bool
        True when these were all orders, so that none has a smaller figure.
    measured_before, measured_after : float or None
        Error of one real step of length `measured_step` for the given and for the new order: its spectral norm
        (``"norm"``), its Frobenius norm over 2^(n/2) (``"rms"``), or the root mean square error of the observable in
        32 random states drawn from the seed. The second is never above the first. None above 10 qubits and where
        no step can be told from none.
    measured_step : float or None
        A tenth over the sum of |coefficients| of all parts.
    passed_over : int
        Orders with a smaller figure that were not taken since they measured worse than the given one. At most 16
        are measured; the given order is kept where all of them are worse.
    """

    partition: Partition
    before: float
    after: float
    figure: str
    order: tuple[int, ...]
    evaluations: int
    exhaustive: bool
    measured_before: float | None = None
    measured_after: float | None = None
    measured_step: float | None = None
    passed_over: int = 0

    @property
    def gain(self) -> float:
        """`before` over `after`, a ratio of figures: 1 when nothing was gained, infinite when nothing is left."""
        return _ratio(self.before, self.after)

    @property
    def measured_gain(self) -> float | None:
        """`measured_before` over `measured_after`, at least 1; None where nothing was measured."""
        if self.measured_before is None or self.measured_after is None:
            return None
        return _ratio(self.measured_before, self.measured_after)

    def __str__(self) -> str:
        found = "the best of all orders" if self.exhaustive else f"the best of {self.evaluations} orders"
        if self.passed_over:
            found += f", but for {self.passed_over} that measured worse"
        computed, watched = FIGURES[self.figure]
        told = f"leading error ({computed}) {self.before:.4g} -> {self.after:.4g}, {self.gain:.3g} times less; {found}"
        if self.measured_gain is None:
            return f"{told}; not measured"
        return (
            f"{told}; one step of {self.measured_step:.3g} measured ({watched}) "
            f"{self.measured_before:.4g} -> {self.measured_after:.4g}, {self.measured_gain:.3g} times less"
        )


def _ratio(before: float, after: float) -> float:
    if after == before:
        return 1.0
    return before / after if after > 0 else math.inf


@dataclass(frozen=True)
class Search:
    """The best order of a search: its figure, that of the first order, and the number of orders tried."""

    order: tuple[int, ...]
    before: float
    after: float
    evaluations: int
    exhaustive: bool


def search(figure: Figure, count: int, seed: int, evaluations: int) -> Search:
    """Look for the order of `count` parts with the least figure.

    Parameters
    ----------
    figure : callable
        From an order, a sequence of part numbers, to what is to be small.
    count : int
    seed : int
        At least 0.
    evaluations : int
        Most orders to look at, at least 1; all of them where there are no more.

    Returns
    -------
    Search
    """
    given = tuple(range(count))
    before = figure(given)
    if math.factorial(min(count, 20)) <= evaluations and count <= 20:
        best, after, tried = given, before, 1
        for order in itertools.islice(itertools.permutations(given), 1, None):
            value = figure(order)
            tried += 1
            if value < after * _GAIN:
                best, after = order, value
        return Search(best, before, after, tried, True)
    draw = random.Random(seed)
    best, after, left = given, before, evaluations - 1
    start, value = list(given), before
    while left > 0:
        start, value, left = _descend(figure, start, value, draw, left)
        if value < after * _GAIN:
            best, after = tuple(start), value
        if left > 0:
            _shuffle(start, draw)
            value = figure(start)
            left -= 1
    if value < after * _GAIN:
        best, after = tuple(start), value
    return Search(best, before, after, evaluations, False)


def _descend(
    figure: Figure, order: list[int], value: float, draw: random.Random, left: int
) -> tuple[list[int], float, int]:
    """Take every move that helps, until none does or the allowance is used up."""
    count = len(order)
    moves = [
        (a, b, move) for move in (True, False) for a in range(count) for b in range(count) if _distinct(a, b, move)
    ]
    helped = True
    while helped:
        helped = False
        _shuffle(moves, draw)
        for a, b, move in moves:
            if left == 0:
                return order, value, 0
            trial = order.copy()
            if move:
                trial.insert(b, trial.pop(a))
            else:
                trial[a], trial[b] = trial[b], trial[a]
            left -= 1
            found = figure(trial)
            if found < value * _GAIN:
                order, value, helped = trial, found, True
    return order, value, left


def _distinct(a: int, b: int, move: bool) -> bool:
    """Each move once: neighbours exchange by a move forward."""
    return a != b and a != b + 1 if move else a + 1 < b


def _shuffle(items: list[Any], draw: random.Random) -> None:
    for last in range(len(items) - 1, 0, -1):
        other = int(draw.random() * (last + 1))
        items[last], items[other] = items[other], items[last]


def improve(
    partition: Partition, formula: Formula | str, for_: str | Operator, seed: int, evaluations: int
) -> Improved:
    """Look for a better order of the parts; see `Partition.improved`."""
    known, kind, reverse = _kind(formula)
    observable = _observable(partition, for_)
    _whole("seed", seed, 0)
    _whole("evaluations", evaluations, 1)
    parts = partition.parts
    name = for_ if isinstance(for_, str) else "observable"
    if len(parts) < 2:
        return Improved(partition, 0.0, 0.0, name, tuple(range(len(parts))), 1, True)
    error = LeadingError(parts, kind, reverse=reverse, observable=observable)
    figure = error.root_mean_square if name == "rms" else error.one_norm
    seen: dict[tuple[int, ...], float] = {}

    def recorded(order: Sequence[int]) -> float:
        value = seen[tuple(order)] = figure(order)
        return value

    found = search(recorded, len(parts), seed, evaluations)
    given = tuple(range(len(parts)))
    better = partition.reordered(found.order) if found.order != given else partition
    told = Improved(better, found.before, found.after, name, found.order, found.evaluations, found.exhaustive)
    if partition.qubits > MOST_MEASURED_QUBITS:
        return told
    from trueturn._step_error import StepError  # imports formulas, which import partitions, which import this

    measure = StepError(partition, known, name, observable, seed)
    if not measure.possible:
        return told
    before = measure(partition)
    ranked = [
        order for order in sorted(seen, key=lambda order: (seen[order], order)) if seen[order] < found.before * _GAIN
    ]
    if found.order != given:
        ranked = [found.order, *(order for order in ranked if order != found.order)][:MOST_MEASURED]
    passed_over, order, taken, after = 0, given, partition, before
    for trial in ranked:
        reordered = partition.reordered(trial)
        measured = measure(reordered)
        if measured <= before:
            order, taken, after = trial, reordered, measured
            break
        passed_over += 1
    return replace(
        told,
        partition=taken,
        after=seen[order],
        order=order,
        measured_before=before,
        measured_after=after,
        measured_step=measure.step,
        passed_over=passed_over,
    )


def _kind(formula: Formula | str) -> tuple[Formula, str, bool]:
    from trueturn.formulas import Formula as FormulaClass
    from trueturn.formulas import formula as look_up

    known = look_up(formula) if isinstance(formula, str) else formula
    if not isinstance(known, FormulaClass):
        raise FormulaError(
            f"formula: is not a Formula ({formula!r}); give 'lie', 'strang' or a Formula with their stages",
            name=str(formula),
            choices=KINDS,
        )
    weights = [stage.weight for stage in known.stages]
    reverse = [stage.direction == "reverse" for stage in known.stages]
    if weights == [1.0]:
        return known, "lie", reverse[0]
    if weights == [0.5, 0.5] and reverse[0] != reverse[1]:
        return known, "strang", reverse[0]
    raise FormulaError(
        f"formula: no leading error at hand for {known.name!r}; improve the order for one of {', '.join(KINDS)}",
        name=known.name,
        choices=KINDS,
    )


def _observable(partition: Partition, for_: object) -> Operator | None:
    if isinstance(for_, str) and for_ in ("norm", "rms"):
        return None
    if not isinstance(for_, Operator):
        raise ArgumentError(
            f"for_: is neither 'norm', 'rms' nor an Operator ({for_!r}); give one of them", argument="for_", value=for_
        )
    if for_.qubits > partition.qubits and for_.support() and for_.support()[-1] >= partition.qubits:
        raise OperatorError(
            f"for_: acts on qubit {for_.support()[-1]} and the parts on {partition.qubits} qubits; "
            "give an observable of these qubits",
            argument="for_",
        )
    return for_


def _whole(name: str, value: object, least: int) -> None:
    if isinstance(value, bool) or not isinstance(value, int) or value < least:
        raise ArgumentError(
            f"{name}: is not a whole number of at least {least} ({value!r}); give one", argument=name, value=value
        )
