"""Colour Pauli strings so that strings of one colour commute, with few colours.

The graph has an edge between two strings that do not commute. Every strategy gives each string the lowest
colour that no neighbour has; they differ in the order in which strings are taken:

- ``largest-first``: most neighbours first. At most max_i min(d_i + 1, i) colours for degrees d_1 ≥ d_2 ≥ …
  (Welsh and Powell 1967).
- ``smallest-last``: the string with fewest neighbours among those left is put last, again and again. At most
  one colour more than the largest such number of neighbours (Matula and Beck 1983).
- ``saturation``: next comes the string whose neighbours have most colours already, then the one with most
  uncoloured neighbours. Never more than two colours where two suffice (Brélaz 1979).

Equal strings in this sense keep their given order. Fewest colours of all is NP-hard, so no search is made.

References
----------
D. J. A. Welsh and M. B. Powell, "An upper bound for the chromatic number of a graph and its application to
timetabling problems", Comput. J. 10, 85 (1967); D. Brélaz, "New methods to color the vertices of a graph",
Commun. ACM 22, 251 (1979); D. W. Matula and L. L. Beck, "Smallest-last ordering and clustering and graph
coloring algorithms", J. ACM 30, 417 (1983). From memory.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from trueturn.operator import Operator

__all__ = ["STRATEGIES", "Conflicts", "colour_strings"]

_ROWS_AT_ONCE = 256

Colours = npt.NDArray[np.intp]


class Conflicts:
    """Which strings of an operator do not commute, one row at a time: memory grows with strings × qubits."""

    def __init__(self, terms: Operator) -> None:
        self.count = len(terms)
        self._x = _bits(terms.x_masks.tolist(), terms.qubits)
        self._z = _bits(terms.z_masks.tolist(), terms.qubits)

    def row(self, term: int) -> npt.NDArray[np.bool_]:
        """Return, for every string, whether it fails to commute with one: ndarray, shape (count,), bool."""
        found: npt.NDArray[np.bool_] = self._rows(slice(term, term + 1))[0]
        return found

    def degrees(self) -> npt.NDArray[np.int64]:
        """Return the number of strings with which each does not commute."""
        starts = range(0, self.count, _ROWS_AT_ONCE)
        blocks = [self._rows(slice(start, start + _ROWS_AT_ONCE)).sum(axis=1) for start in starts]
        return np.concatenate([np.zeros(0, dtype=np.int64), *blocks])

    def _rows(self, chosen: slice) -> npt.NDArray[np.bool_]:
        # Sums of at most 256 ones: exact in single precision, whatever the order of summation.
        shared = self._x[chosen] @ self._z.T + self._z[chosen] @ self._x.T
        found: npt.NDArray[np.bool_] = shared % 2 == 1
        return found


def colour_strings(terms: Operator, strategy: str) -> list[int]:
    """Give each string a colour; strings of one colour commute pairwise.

    Parameters
    ----------
    terms : Operator
        Without identity.
    strategy : str
        One of `STRATEGIES`.

    Returns
    -------
    list of int
        Colours from 0, without gaps, in the order of the terms.

    Notes
    -----
    About strings² × qubits operations: 10^4 strings take seconds.
    """
    return [int(colour) for colour in STRATEGIES[strategy](Conflicts(terms))]


def _largest_first(conflicts: Conflicts) -> Colours:
    return _greedy(conflicts, np.argsort(-conflicts.degrees(), kind="stable"))


def _smallest_last(conflicts: Conflicts) -> Colours:
    left = conflicts.degrees()
    gone = conflicts.count + 1  # more than any degree
    order: list[int] = []
    for _ in range(conflicts.count):
        term = conflicts.count - 1 - int(np.argmin(left[::-1]))  # the last of equals, so that they keep their order
        order.append(term)
        left = left - np.where(left < gone, conflicts.row(term), 0)
        left[term] = gone
    return _greedy(conflicts, np.array(order[::-1], dtype=np.intp))


def _saturation(conflicts: Conflicts) -> Colours:
    count = conflicts.count
    colours = np.full(count, -1, dtype=np.intp)
    uncoloured_neighbours = conflicts.degrees()
    seen = np.zeros(count, dtype=np.int64)  # number of colours among the neighbours
    barred: list[npt.NDArray[np.bool_]] = []  # for each colour, the strings that may not take it
    for _ in range(count):
        urgency = np.where(colours < 0, seen * (count + 1) + uncoloured_neighbours, -1)
        term = int(np.argmax(urgency))
        colour = next((c for c, closed in enumerate(barred) if not closed[term]), len(barred))
        if colour == len(barred):
            barred.append(np.zeros(count, dtype=bool))
        neighbours = conflicts.row(term)
        seen += neighbours & ~barred[colour]
        barred[colour] |= neighbours
        uncoloured_neighbours -= neighbours
        colours[term] = colour
    return colours


def _greedy(conflicts: Conflicts, order: npt.NDArray[np.intp]) -> Colours:
    colours = np.full(conflicts.count, -1, dtype=np.intp)
    for term in order.tolist():
        near = colours[conflicts.row(term)]
        taken = np.zeros(len(near) + 1, dtype=bool)
        taken[near[(near >= 0) & (near < len(taken))]] = True
        colours[term] = int(np.argmin(taken))
    return colours


STRATEGIES: dict[str, Callable[[Conflicts], Colours]] = {
    "largest-first": _largest_first,
    "smallest-last": _smallest_last,
    "saturation": _saturation,
}


def _bits(masks: list[int], qubits: int) -> npt.NDArray[np.float32]:
    """One row of zeros and ones for each mask."""
    packed = np.frombuffer(b"".join(mask.to_bytes(16, "little") for mask in masks), dtype=np.uint8)
    bits = np.unpackbits(packed.reshape(len(masks), 16), axis=1, bitorder="little")
    return bits[:, :qubits].astype(np.float32)
