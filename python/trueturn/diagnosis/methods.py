"""The library's formulas as patterns: what angles, in what order, a circuit of equal steps shows for each string.

With strings in an order L, a forward stage runs through L and a reverse one backwards. A string merges with itself
at a turn from forward to reverse unless something that anticommutes with it stands after it in L, at a turn from
reverse to forward unless something stands before it. So there are four patterns in all, whatever the partition.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import numpy.typing as npt

from trueturn.diagnosis.unfolding import Ints, Reals
from trueturn.formulas import formula_entry, formulas

__all__ = ["Method", "known_methods", "stage_places"]

NOTHING = 1e-14
"""Weights that merge to less than this, as a share of the whole time, have cancelled."""


@dataclass(frozen=True, eq=False)
class Method:
    """Stages of a formula: weights, and whether each runs forward; both of shape (stages,)."""

    name: str
    weights: Reals
    forward: npt.NDArray[np.bool_]

    @property
    def symmetric(self) -> bool:
        """Whether the stages read the same backwards with directions exchanged."""
        return bool(np.array_equal(self.weights, self.weights[::-1]) and np.all(self.forward != self.forward[::-1]))

    def pattern(self, steps: int, before: bool, after: bool) -> tuple[Ints, Reals]:
        """Give the merged rotations of a string as (number of the first stage, share of the whole angle).

        Parameters
        ----------
        steps : int
        before, after : bool
            Whether something that anticommutes with the string stands before it in the order, and after it.
        """
        weights = np.tile(self.weights, steps) / steps
        forward = np.tile(self.forward, steps)
        turns_back = forward[:-1] & ~forward[1:]
        turns_forth = ~forward[:-1] & forward[1:]
        parted = np.where(turns_back, after, np.where(turns_forth, before, before or after))
        starts = np.concatenate([[0], np.flatnonzero(parted) + 1])
        shares = np.add.reduceat(weights, starts)
        alive = np.abs(shares) > NOTHING
        return starts[alive], shares[alive]

    def steps_with(self, count: int, before: bool, after: bool) -> int | None:
        """Find the number of steps in which a string has `count` merged rotations."""
        one, two, three = _counts(self, before, after)
        if count == one:
            return 1
        if three > two and count >= two and (count - two) % (three - two) == 0:
            return 2 + (count - two) // (three - two)
        return None


@cache
def _counts(method: Method, before: bool, after: bool) -> tuple[int, int, int]:
    """Rotations of a string in one, two and three steps."""
    one, two, three = (method.pattern(steps, before, after)[0].size for steps in (1, 2, 3))
    return one, two, three


@cache
def known_methods() -> tuple[Method, ...]:
    """List the formulas of the library that hold for any partition."""
    found = []
    for name in formulas():
        stages = formula_entry(name).exact_stages()
        weights = np.array([float(weight) for weight, _ in stages])
        found.append(Method(name, weights, np.array([direction == "forward" for _, direction in stages])))
    return tuple(found)


def stage_places(method: Method, steps: int, stages: Ints, rank: int, size: int) -> Ints:
    """Give places, ascending, for the rotations of the string of this rank that stand in these stages."""
    forward = np.tile(method.forward, steps)[stages]
    return np.where(forward, stages * size + rank, stages * size + size - 1 - rank)
