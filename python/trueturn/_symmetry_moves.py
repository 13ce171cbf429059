"""Moves of sites that may be symmetries: translations and reflections of rings, rectangles and given lattices.

A move becomes a symmetry of qubits by renaming them, and of electrons by renaming Majorana operators (see
`_symmetry_electrons`).
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from trueturn.lattice import Lattice

__all__ = ["Move", "found", "of_lattice"]

_MADE = re.compile(r"(chain|ring|complete|ladder|square)\((\d+)(?:, (\d+))?(?:, periodic)?\)")


@dataclass(frozen=True)
class Move:
    """One permutation of sites.

    Attributes
    ----------
    name : str
    extents : str
        Such as "3 × 4", empty in one dimension.
    meaning : str
        What becomes of place q, or of row and column.
    sites : mapping of int to int
        New site of each.
    wrapped : frozenset of int
        Sites that cross the boundary, for translations.
    """

    name: str
    extents: str
    meaning: str
    sites: Mapping[int, int]
    wrapped: frozenset[int]


def found(sites: int, keeps: Callable[[Move], bool]) -> list[Move]:
    """Return the moves to report where no lattice is given.

    The least translation of the ring that is kept (by one if none is), then for each rectangle of rows and columns
    the least kept translation of columns, and with it the one of rows where that is the least of the ring; then
    the reflection.
    """
    if sites < 2:
        return []
    shift = _least(1, sites, "column", keeps)
    ring = shift or _shifted(1, sites, "column", 1)
    moves = [ring]
    for rows, columns in _rectangles(sites):
        if rows == 1 or columns == 1:
            continue
        across = _least(rows, columns, "column", keeps)
        if across is not None:
            down = [_shifted(rows, columns, "row", d) for d in _divisors(rows)]
            moves += [move for move in down if shift is not None and move.sites == shift.sites]
            moves.append(across)
    return [*moves, _reflected(1, sites, "column")]


def of_lattice(lattice: Lattice, keeps: Callable[[Move], bool]) -> list[Move]:
    """Return the translations and reflections that map the bonds of a lattice to bonds.

    Of the translations in one direction, the least that is kept, or the least there is.
    """
    bonds = set(lattice.bonds)

    def allowed(move: Move) -> bool:
        ends = ((move.sites[i], move.sites[j]) for i, j in lattice.bonds)
        return all((min(pair), max(pair)) in bonds for pair in ends)

    made = _MADE.fullmatch(lattice.name)
    extents = list(_rectangles(lattice.sites))
    if made is not None:
        kind, first, second = made.groups()
        named = {"square": (int(first), int(second or 0)), "ladder": (int(first), 2)}.get(kind, (1, int(first)))
        extents = [named] if named in extents else extents
    moves: list[Move] = []
    for rows, columns in extents:
        for way, extent in (("row", rows), ("column", columns)):
            if extent > 1:
                steps = [move for d in _divisors(extent) if allowed(move := _shifted(rows, columns, way, d))]
                moves += [next(filter(keeps, steps), steps[0])] if steps else []
        moves += [_reflected(rows, columns, way) for way, extent in (("row", rows), ("column", columns)) if extent > 1]
        if rows == columns > 1:
            moves.append(_transposed(rows))
    unlike: dict[tuple[int, ...], Move] = {}
    for move in filter(allowed, moves):
        # exchanging two rows is a translation and a reflection: named once
        unlike.setdefault(tuple(move.sites[site] for site in range(lattice.sites)), move)
    return list(unlike.values())


def _rectangles(sites: int) -> Iterator[tuple[int, int]]:
    return ((rows, sites // rows) for rows in range(1, sites + 1) if sites % rows == 0 and (rows < sites or sites == 1))


def _divisors(extent: int) -> list[int]:
    return [d for d in range(1, extent) if extent % d == 0]


def _least(rows: int, columns: int, way: str, keeps: Callable[[Move], bool]) -> Move | None:
    extent = rows if way == "row" else columns
    return next(filter(keeps, (_shifted(rows, columns, way, d) for d in _divisors(extent))), None)


def _move(
    name: str,
    meaning: str,
    rows: int,
    columns: int,
    place: Callable[[int, int], tuple[int, int]],
    wrapped: frozenset[int],
) -> Move:
    sites = {}
    for site in range(rows * columns):
        row, column = place(*divmod(site, columns))
        sites[site] = row * columns + column
    return Move(name, "" if rows == 1 else f"{rows} × {columns}", meaning, sites, wrapped)


def _shifted(rows: int, columns: int, way: str, d: int) -> Move:
    def place(row: int, column: int) -> tuple[int, int]:
        return ((row + d) % rows, column) if way == "row" else (row, (column + d) % columns)

    extent = rows if way == "row" else columns
    sites = range(rows * columns)
    wrapped = frozenset(s for s in sites if (s // columns if way == "row" else s % columns) + d >= extent)
    if rows == 1:
        name, meaning = f"translation by {d}", f"q becomes q + {d} modulo {columns}"
    else:
        name = f"translation by {d} {way}{'s' if d > 1 else ''}"
        meaning = f"{way} becomes {way} + {d} modulo {extent}"
    return _move(name, meaning, rows, columns, place, wrapped)


def _reflected(rows: int, columns: int, way: str) -> Move:
    def place(row: int, column: int) -> tuple[int, int]:
        return (rows - 1 - row, column) if way == "row" else (row, columns - 1 - column)

    if rows == 1:
        return _move("reflection", f"q becomes {columns - 1} - q", rows, columns, place, frozenset())
    meaning = f"{way} becomes {(rows if way == 'row' else columns) - 1} - {way}"
    return _move(f"reflection of {way}s", meaning, rows, columns, place, frozenset())


def _transposed(extent: int) -> Move:
    meaning = "row becomes column and column row"
    return _move("reflection in the diagonal", meaning, extent, extent, lambda row, column: (column, row), frozenset())
