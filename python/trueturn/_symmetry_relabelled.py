"""Rows for moves of qubits, and of electrons, from site to site."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from trueturn import _symmetry_electrons as electrons
from trueturn import _symmetry_moves as moves
from trueturn._symmetry_moves import Move
from trueturn._symmetry_rows import Symmetry, row
from trueturn.lattice import Lattice
from trueturn.operator import Operator

__all__ = ["relabelling", "relabellings"]

_RELATIVE = 2.0**-50  # coefficients equal up to eight units in the last place of the largest


def relabellings(judged: list[Operator], lattice: Lattice | None, electronic: bool) -> list[Symmetry]:
    """Rows of qubits, then of electrons where that picture applies."""
    n = judged[0].qubits

    def keeps(move: Move) -> bool:
        return _same_after(judged[0], move.sites)

    of_qubits = lattice is not None and lattice.sites == n
    rows = []
    for move in moves.of_lattice(lattice, keeps) if lattice is not None and of_qubits else moves.found(n, keeps):
        name = f"{move.name} ({move.extents})" if move.extents else move.name
        rows.append(relabelling(name, f"qubits: {move.meaning}", move.sites, judged))
    return rows if of_qubits or not electronic else [*rows, *_fermion_moves(judged, lattice)]


def _fermion_moves(judged: list[Operator], lattice: Lattice | None) -> list[Symmetry]:
    whole = judged[0]
    n = whole.qubits

    def keeps(operator: Operator, move: Move, flipped: frozenset[int]) -> bool:
        return _near(operator, electrons.image(operator, move.sites, flipped))

    def boundary(move: Move) -> str | None:
        signs = {"periodic": frozenset[int](), "antiperiodic": move.wrapped}
        return next((name for name, flipped in signs.items() if keeps(whole, move, flipped)), None)

    def kept(move: Move) -> bool:
        return boundary(move) is not None

    rows = []
    for move in moves.of_lattice(lattice, kept) if lattice is not None else moves.found(n // 2, kept):
        closing = boundary(move) or "periodic"
        where = f"{move.extents} sites".strip() + (", antiperiodic" if closing == "antiperiodic" else "")
        flipped = move.wrapped if closing == "antiperiodic" else frozenset()
        meaning = f"sites of electrons: {move.meaning}, with the signs of fermions; {closing}"
        rows.append(
            row(
                f"fermion {move.name} ({where})",
                meaning,
                judged,
                lambda operator, move=move, flipped=flipped: keeps(operator, move, flipped),  # type: ignore[misc]
            )
        )
    return rows


def relabelling(name: str, meaning: str, names: Mapping[int, int], judged: list[Operator]) -> Symmetry:
    """Judge one renaming of qubits."""
    return row(name, meaning, judged, lambda operator: _same_after(operator, names))


def _same_after(operator: Operator, names: Mapping[int, int]) -> bool:
    return _near(operator, operator.relabel(names))


def _near(operator: Operator, other: Operator) -> bool:
    largest = float(np.max(np.abs(operator.coefficients), initial=0.0))
    return other.near(operator, _RELATIVE * largest)
