"""Which physical qubits are joined: a word, a lattice or a list of pairs, checked."""

from __future__ import annotations

import difflib
import math
import operator
from collections.abc import Iterable, Sequence

from trueturn.errors import ArgumentError
from trueturn.lattice import Lattice

__all__ = ["WORDS", "Edges", "edges_of", "first_apart", "require_connected"]

WORDS = ("all", "line", "ring", "grid")
"""Connectivities that have a name."""

MOST_QUBITS = 16384
"""The largest device; far above what exists, and its searches stay quick."""

Edges = tuple[tuple[int, int], ...]


def edges_of(connectivity: object, qubits: int) -> tuple[int, Edges | None]:
    """Return the number of physical qubits and their edges, None where all are joined.

    Parameters
    ----------
    connectivity : None, str, Lattice, or iterable of (int, int)
        None and ``"all"`` join every pair; ``"line"`` and ``"ring"`` have as many qubits as the circuit,
        ``"grid"`` is the smallest near-square grid that holds them, row by row.
    qubits : int
        Of the circuit.

    Raises
    ------
    ArgumentError
        Not one of these; a pair that is no pair of distinct qubit numbers; fewer qubits than the circuit has.
    """
    if connectivity is None or connectivity == "all":
        return qubits, None
    if isinstance(connectivity, str):
        return _named(connectivity, qubits)
    if isinstance(connectivity, Lattice):
        count, edges = connectivity.sites, connectivity.bonds
    else:
        edges = _pairs(connectivity)
        count = 1 + max((max(pair) for pair in edges), default=0)
    if count < qubits:
        raise _refuse(f"has {count} qubits, the circuit {qubits}", count, "join at least as many as the circuit has")
    return count, edges


def _named(word: str, qubits: int) -> tuple[int, Edges]:
    if word == "line":
        return qubits, tuple((k, k + 1) for k in range(qubits - 1))
    if word == "ring":
        pairs = {(min(k, (k + 1) % qubits), max(k, (k + 1) % qubits)) for k in range(qubits)}
        return qubits, tuple(sorted(pair for pair in pairs if pair[0] != pair[1]))
    if word == "grid":
        columns = max(1, math.isqrt(max(qubits - 1, 0)) + 1)
        rows = max(1, -(-qubits // columns))
        across = [(k, k + 1) for k in range(rows * columns) if (k + 1) % columns]
        down = [(k, k + columns) for k in range((rows - 1) * columns)]
        return rows * columns, tuple(across + down)
    near = difflib.get_close_matches(word, WORDS, n=1, cutoff=0.5)
    hint = f"did you mean {near[0]!r}? " if near else ""
    known = ", ".join(map(repr, WORDS))
    raise _refuse("unknown", word, f"{hint}choose one of {known}, a lattice, or a list of pairs")


def _pairs(connectivity: object) -> Edges:
    remedy = "give pairs of qubit numbers, such as [(0, 1), (1, 2)]"
    if not isinstance(connectivity, Iterable):
        raise _refuse("neither a word nor a lattice nor a list of pairs", connectivity, remedy)
    made = []
    for pair in connectivity:
        try:
            a, b = (operator.index(end) for end in pair)
        except (TypeError, ValueError):
            raise _refuse("not a pair of whole numbers", pair, remedy) from None
        if a == b:
            raise _refuse("joins a qubit to itself", (a, b), remedy)
        if not (0 <= a < MOST_QUBITS and 0 <= b < MOST_QUBITS):
            raise _refuse("qubit number out of range", (a, b), f"use 0 to {MOST_QUBITS - 1}")
        made.append((a, b))
    return tuple(made)


def first_apart(count: int, edges: Edges, layout: Sequence[int]) -> int | None:
    """Return the first physical qubit of a layout that cannot meet the others; None where all can."""
    neighbours: list[list[int]] = [[] for _ in range(count)]
    for a, b in edges:
        neighbours[a].append(b)
        neighbours[b].append(a)
    reached, waiting = set(layout[:1]), list(layout[:1])
    while waiting:
        for place in neighbours[waiting.pop()]:
            if place not in reached:
                reached.add(place)
                waiting.append(place)
    return next((place for place in layout if place not in reached), None)


def require_connected(count: int, edges: Edges, layout: Sequence[int]) -> None:
    """Refuse a device on which two qubits of the circuit cannot meet."""
    apart = first_apart(count, edges, layout)
    if apart is not None:
        remedy = 'add edges, give a layout, or layout="search"'
        raise _refuse("disconnected", f"no way from qubit {layout[0]} to qubit {apart}", remedy)


def _refuse(wrong: str, value: object, remedy: str) -> ArgumentError:
    shown = repr(value) if not isinstance(value, str) or value in WORDS else value
    shown = shown if len(shown) <= 80 else shown[:79] + "…"
    return ArgumentError(f"connectivity: {wrong} ({shown}); {remedy}", argument="connectivity", value=value)
