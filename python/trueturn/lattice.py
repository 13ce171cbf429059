"""Lattices: numbered sites and the bonds between them.

A lattice says who interacts with whom; `trueturn.model` turns it into an operator. A bond is a pair ``(i,
j)`` with ``i < j``; a pair that periodic closing would draw twice, or from a site to itself, is drawn once or
not at all, so that a strength is never doubled by accident. Sites start at 0 and end at 127, the widest Pauli
string.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from operator import index

from trueturn.errors import ModelError

__all__ = ["Lattice", "chain", "complete", "from_bonds", "ladder", "ring", "square"]

MOST_SITES = 128


@dataclass(frozen=True)
class Lattice:
    """Hold sites and bonds; made by the functions of this module.

    Parameters
    ----------
    sites : int
        Number of sites, 1 to 128.
    bonds : tuple of (int, int)
        Pairs ``(i, j)`` with ``0 <= i < j < sites``, each at most once. Per-bond strengths of a model follow
        this order.
    name : str
        For labels only.

    Raises
    ------
    ModelError
        Number of sites out of range, or a bond that is no pair, leaves the lattice, joins a site to itself,
        has its larger site first, or repeats.

    Examples
    --------
    >>> import trueturn as tt
    >>> tt.lattice.chain(3).bonds
    ((0, 1), (1, 2))
    """

    sites: int
    bonds: tuple[tuple[int, int], ...]
    name: str = "lattice"

    def __post_init__(self) -> None:
        sites = _count("sites", self.sites)
        bonds = tuple(_pair(bond) for bond in self.bonds)
        seen: set[tuple[int, int]] = set()
        for low, high in bonds:
            if low > high:
                raise ModelError(
                    f"bonds: the larger site comes first ({low}, {high}); "
                    "write the smaller first, or use lattice.from_bonds, which sorts each pair",
                    argument="bonds",
                )
            if high >= sites:
                raise ModelError(
                    f"bonds: the bond ({low}, {high}) leaves the lattice of {sites} sites; "
                    f"use sites 0 to {sites - 1}, or raise `sites`",
                    argument="bonds",
                )
            if (low, high) in seen:
                raise ModelError(
                    f"bonds: the bond ({low}, {high}) is listed twice; list it once and give the sum as its strength",
                    argument="bonds",
                )
            seen.add((low, high))
        object.__setattr__(self, "sites", sites)
        object.__setattr__(self, "bonds", bonds)


def chain(n: int) -> Lattice:
    """Make an open chain.

    Parameters
    ----------
    n : int
        Number of sites, 1 to 128.

    Returns
    -------
    Lattice
        Bonds ``(k, k + 1)`` for k from 0 to n - 2, in that order.

    Raises
    ------
    ModelError
        `n` is not an integer from 1 to 128.

    Examples
    --------
    >>> chain(4).bonds
    ((0, 1), (1, 2), (2, 3))
    """
    n = _count("n", n)
    return Lattice(n, tuple((k, k + 1) for k in range(n - 1)), f"chain({n})")


def ring(n: int) -> Lattice:
    """Make a chain whose ends are joined.

    Parameters
    ----------
    n : int
        Number of sites, 1 to 128.

    Returns
    -------
    Lattice
        The bonds of the chain in order, then ``(0, n - 1)``. Two sites have one bond, not two.

    Raises
    ------
    ModelError
        `n` is not an integer from 1 to 128.

    Examples
    --------
    >>> ring(4).bonds
    ((0, 1), (1, 2), (2, 3), (0, 3))
    >>> ring(2).bonds
    ((0, 1),)
    """
    n = _count("n", n)
    return Lattice(n, _drawn_once((k, (k + 1) % n) for k in range(n)), f"ring({n})")


def ladder(rungs: int) -> Lattice:
    """Make two open chains joined by rungs.

    Parameters
    ----------
    rungs : int
        Number of rungs, 1 to 64. Site ``2 * rung + leg`` with leg 0 or 1.

    Returns
    -------
    Lattice
        Rung by rung: the rung ``(2k, 2k + 1)``, then the legs to the next rung ``(2k, 2k + 2)`` and
        ``(2k + 1, 2k + 3)``.

    Raises
    ------
    ModelError
        `rungs` is not an integer from 1 to 64.

    Examples
    --------
    >>> ladder(2).bonds
    ((0, 1), (0, 2), (1, 3), (2, 3))
    """
    rungs = _count("rungs", rungs, MOST_SITES // 2)
    bonds: list[tuple[int, int]] = []
    for left in range(0, 2 * rungs, 2):
        bonds.append((left, left + 1))
        if left + 2 < 2 * rungs:
            bonds += [(left, left + 2), (left + 1, left + 3)]
    return Lattice(2 * rungs, tuple(bonds), f"ladder({rungs})")


def square(rows: int, columns: int, periodic: bool = False) -> Lattice:
    """Make a rectangular piece of the square lattice.

    Parameters
    ----------
    rows, columns : int
        Extents, each at least 1, at most 128 sites together. Site ``row * columns + column``.
    periodic : bool, default False
        Join the last row to the first and the last column to the first (a torus). A direction two sites wide
        keeps its single bond, and a direction one site wide has none.

    Returns
    -------
    Lattice
        Site by site in increasing number: the bond to the next column, then the bond to the next row.

    Raises
    ------
    ModelError
        An extent below 1, more than 128 sites, or `periodic` that is no bool.

    Examples
    --------
    >>> square(2, 2).bonds
    ((0, 1), (0, 2), (1, 3), (2, 3))
    >>> len(square(3, 3, periodic=True).bonds), len(square(3, 2, periodic=True).bonds)
    (18, 9)
    """
    rows, columns = _count("rows", rows), _count("columns", columns)
    if rows * columns > MOST_SITES:
        raise ModelError(
            f"rows, columns: {rows} x {columns} is more than {MOST_SITES} sites ({rows * columns}); "
            f"choose extents whose product is at most {MOST_SITES}",
            argument="rows, columns",
        )
    if not isinstance(periodic, bool):
        raise ModelError(
            f"periodic: is not a bool ({periodic!r}); write periodic=True or periodic=False",
            argument="periodic",
        )
    pairs: list[tuple[int, int]] = []
    for row in range(rows):
        for column in range(columns):
            site = row * columns + column
            if column + 1 < columns or periodic:
                pairs.append((site, row * columns + (column + 1) % columns))
            if row + 1 < rows or periodic:
                pairs.append((site, (row + 1) % rows * columns + column))
    suffix = ", periodic" if periodic else ""
    return Lattice(rows * columns, _drawn_once(pairs), f"square({rows}, {columns}{suffix})")


def complete(n: int) -> Lattice:
    """Join every site to every other.

    Parameters
    ----------
    n : int
        Number of sites, 1 to 128.

    Returns
    -------
    Lattice
        Bonds ``(i, j)`` with i < j in lexicographic order, n (n - 1) / 2 of them.

    Raises
    ------
    ModelError
        `n` is not an integer from 1 to 128.

    Examples
    --------
    >>> complete(3).bonds
    ((0, 1), (0, 2), (1, 2))
    """
    n = _count("n", n)
    return Lattice(n, tuple((i, j) for i in range(n) for j in range(i + 1, n)), f"complete({n})")


def from_bonds(pairs: Iterable[Sequence[int]], sites: int | None = None) -> Lattice:
    """Make a lattice from its bonds.

    Parameters
    ----------
    pairs : iterable of (int, int)
        Two different sites each, in either order. The order of the pairs is kept; inside a pair the smaller
        site is put first.
    sites : int, optional
        Number of sites; by default one more than the largest site named.

    Returns
    -------
    Lattice

    Raises
    ------
    ModelError
        A pair that is no pair of integers from 0 to 127, a site joined to itself, a bond listed twice (in
        either order), a bond that leaves `sites`, or no pairs and no `sites`.

    Examples
    --------
    >>> from_bonds([(0, 1), (2, 1)]).bonds
    ((0, 1), (1, 2))
    """
    try:
        listed = list(pairs)
    except TypeError:
        raise ModelError(
            f"pairs: is not a list of pairs ({pairs!r}); write for example [(0, 1), (1, 2)]",
            argument="pairs",
        ) from None
    bonds: list[tuple[int, int]] = []
    for pair in listed:
        i, j = _pair(pair)
        bonds.append((min(i, j), max(i, j)))
    if sites is None:
        if not bonds:
            raise ModelError(
                "pairs: no bond given ([]), so the number of sites is unknown; give `sites` too",
                argument="pairs",
            )
        sites = 1 + max(high for _, high in bonds)
    return Lattice(sites, tuple(bonds), "from_bonds")


def _drawn_once(pairs: Iterable[tuple[int, int]]) -> tuple[tuple[int, int], ...]:
    """Put the smaller site first and leave out loops and repeats, keeping the order of first appearance."""
    return tuple(dict.fromkeys((min(i, j), max(i, j)) for i, j in pairs if i != j))


def _count(argument: str, value: object, most: int = MOST_SITES) -> int:
    if isinstance(value, bool):
        raise ModelError(f"{argument}: is a bool ({value!r}); give an integer", argument=argument)
    try:
        number = index(value)  # type: ignore[arg-type]
    except TypeError:
        raise ModelError(
            f"{argument}: is not an integer ({value!r}); give an integer from 1 to {most}",
            argument=argument,
        ) from None
    if not 1 <= number <= most:
        raise ModelError(
            f"{argument}: is out of range ({number}); give an integer from 1 to {most}",
            argument=argument,
        )
    return number


def _pair(pair: object) -> tuple[int, int]:
    try:
        i, j = (index(site) for site in pair)  # type: ignore[attr-defined]
    except (TypeError, ValueError):
        raise ModelError(
            f"bonds: a bond is not a pair of integers ({pair!r}); write it as (i, j)", argument="bonds"
        ) from None
    if not (0 <= i < MOST_SITES and 0 <= j < MOST_SITES):
        raise ModelError(
            f"bonds: a site is out of range (({i}, {j})); number sites from 0 to {MOST_SITES - 1}",
            argument="bonds",
        )
    if i == j:
        raise ModelError(
            f"bonds: a bond joins a site to itself (({i}, {j})); leave it out, or give a one-site term as a field",
            argument="bonds",
        )
    return i, j
