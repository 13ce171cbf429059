"""Second moment and beyond: which formula, how many steps, and the order of the strings.

Everything is compared after merging (`trueturn.diagnosis.ordering`), so that it does not matter how a circuit
was merged, or in which order commuting rotations were written down.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from trueturn.diagnosis.methods import Method, known_methods, stage_places
from trueturn.diagnosis.ordering import Settled, shares_of
from trueturn.diagnosis.unfolding import Ints, Reals

__all__ = ["Model", "first_order", "last_order", "recognised"]

SHARE_SLACK = 1e-7
"""How far a share of a string's angle may lie from the formula's, over the largest share."""
CLASSES = 6
"""Different sequences of angles that are looked up in the library."""


@dataclass(frozen=True)
class Model:
    """A formula that explains a circuit: steps (of the shortened word), and the numbers of strings in order."""

    method: Method
    steps: int
    order: tuple[int, ...]

    def ranks(self, size: int) -> Ints:
        """Give the rank of each string in the order; -1 for those that are not in it."""
        ranks = np.full(size, -1)
        ranks[list(self.order)] = np.arange(len(self.order))
        return ranks


def first_order(settled: Settled, strings: Sequence[int]) -> tuple[int, ...]:
    """Order strings by their first rotation: that of a forward first stage."""
    return tuple(sorted(strings, key=lambda string: int(settled.places[string][0])))


def last_order(settled: Settled, strings: Sequence[int], forward: bool) -> tuple[int, ...]:
    """Order strings by their last rotation, which belongs to a forward or to a reverse stage."""
    found = sorted(strings, key=lambda string: int(settled.places[string][-1]))
    return tuple(found if forward else found[::-1])


def recognised(
    settled: Settled,
    neighbours: Sequence[Ints],
    judged: Sequence[int],
    order: tuple[int, ...],
    methods: Sequence[Method] | None = None,
) -> list[Model]:
    """Find the formulas that explain the angles and the order of some strings exactly.

    Parameters
    ----------
    settled : Settled
    neighbours : sequence of arrays
    judged : sequence of int
        Strings that must agree. Others in `order` only keep them from merging.
    order : tuple of int
        All strings that were kept when settling.
    methods : sequence of Method, optional
        Formulas to try; by default the library.

    Returns
    -------
    list of Model
        In the order of the library; several only where the strings cannot tell them apart.
    """
    shares = {string: own for string in judged if (own := shares_of(settled.angles[string])) is not None}
    if len(shares) < len(judged):
        return []
    size = len(neighbours)
    ranks = np.full(size, -1)
    ranks[list(order)] = np.arange(len(order))
    sides = {string: _sides(neighbours[string], ranks, int(ranks[string])) for string in judged}
    classes: dict[tuple[int, bool, bool], int] = {}
    for string in judged:
        before, after = sides[string]
        if before or after:
            classes.setdefault((shares[string].size, before, after), string)
    if not classes:
        return []
    sample = sorted(classes.items(), key=lambda item: -item[0][0])[:CLASSES]
    found = []
    for method in known_methods() if methods is None else methods:
        steps = {method.steps_with(count, before, after) for (count, before, after), _ in sample}
        if len(steps) != 1:
            continue
        (number,) = steps
        if number is None:
            continue
        if all(_agrees(method, number, before, after, shares[string]) for (_, before, after), string in sample):
            model = Model(method, number, order)
            if _explains(model, settled, neighbours, judged, shares, sides, ranks):
                found.append(model)
    return found


def _sides(others: Ints, ranks: Ints, rank: int) -> tuple[bool, bool]:
    known = ranks[others]
    return bool(np.any((known >= 0) & (known < rank))), bool(np.any(known > rank))


def _agrees(method: Method, steps: int, before: bool, after: bool, shares: Reals) -> bool:
    ideal = method.pattern(steps, before, after)[1]
    return ideal.size == shares.size and bool(np.all(np.abs(ideal - shares) <= SHARE_SLACK * np.max(np.abs(ideal))))


def _explains(
    model: Model,
    settled: Settled,
    neighbours: Sequence[Ints],
    judged: Sequence[int],
    shares: dict[int, Reals],
    sides: dict[int, tuple[bool, bool]],
    ranks: npt.NDArray[np.intp],
) -> bool:
    """Compare every judged string, and every pair of them that anticommutes."""
    patterns = {pair: model.method.pattern(model.steps, *pair) for pair in set(sides.values())}
    places: dict[int, Ints] = {}
    for string in judged:
        stages, ideal = patterns[sides[string]]
        if ideal.size != shares[string].size:
            return False
        if np.any(np.abs(ideal - shares[string]) > SHARE_SLACK * np.max(np.abs(ideal))):
            return False
        places[string] = stage_places(model.method, model.steps, stages, int(ranks[string]), len(model.order))
    for string in judged:
        own, own_model = settled.places[string], places[string]
        for other in neighbours[string]:
            if other > string and other in places:
                found = np.searchsorted(settled.places[other], own)
                if not np.array_equal(found, np.searchsorted(places[int(other)], own_model)):
                    return False
    return True
