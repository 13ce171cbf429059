"""Rows of the table of symmetries: one symmetry, what the Hamiltonian and each part make of it, and the table."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from trueturn.errors import ArgumentError
from trueturn.operator import Operator

__all__ = ["Symmetries", "Symmetry", "row"]

_PICTURES = (
    "electron, fermion: qubits 2s and 2s + 1 are the up and down orbitals of site s (Jordan-Wigner)\n"
    "spin x, y, z, squared: another picture, in which each qubit is a spin 1/2"
)


@dataclass(frozen=True)
class Symmetry:
    """One symmetry: whether the Hamiltonian and each part keep it.

    Attributes
    ----------
    name : str
    meaning : str
        What is conserved, or what is done to the qubits.
    kept : bool
        By the Hamiltonian.
    parts : tuple of bool
        By each part, in order; empty when no partition was given.
    quantity : Operator or None
        The conserved operator; None for relabellings and time reversals.
    """

    name: str
    meaning: str
    kept: bool
    parts: tuple[bool, ...]
    quantity: Operator | None

    @property
    def broken_by(self) -> tuple[int, ...]:
        """Numbers of the parts that break it."""
        return tuple(number for number, keeps in enumerate(self.parts) if not keeps)


@dataclass(frozen=True)
class Symmetries:
    """Symmetries of a Hamiltonian and of the parts of a partition; prints as a table.

    Attributes
    ----------
    rows : tuple of Symmetry
    """

    rows: tuple[Symmetry, ...]

    @property
    def kept(self) -> tuple[str, ...]:
        """Names of those that the Hamiltonian has."""
        return tuple(row.name for row in self.rows if row.kept)

    @property
    def endangered(self) -> tuple[str, ...]:
        """Names of those that the Hamiltonian has and some part breaks."""
        return tuple(row.name for row in self.rows if row.kept and row.broken_by)

    def __getitem__(self, name: str) -> Symmetry:
        for row in self.rows:
            if row.name == name:
                return row
        names = tuple(row.name for row in self.rows)
        raise ArgumentError(
            f"name: is unknown ({name!r}); choose one of {', '.join(map(repr, names))}",
            argument="name",
            value=name,
            choices=names,
        )

    def __iter__(self) -> Iterator[Symmetry]:
        return iter(self.rows)

    def __len__(self) -> int:
        return len(self.rows)

    def __repr__(self) -> str:
        with_parts = any(row.parts for row in self.rows)
        table = [("symmetry", "Hamiltonian", "parts") if with_parts else ("symmetry", "Hamiltonian")]
        for row in self.rows:
            cells = (row.name, "keeps" if row.kept else "breaks")
            table.append((*cells, _parts_text(row)) if with_parts else cells)
        widths = [max(map(len, column)) for column in zip(*table, strict=True)]
        lines = ["  ".join(cell.ljust(width) for cell, width in zip(cells, widths, strict=True)) for cells in table]
        notes = [_PICTURES] if any(row.name.startswith(("electron ", "fermion ")) for row in self.rows) else []
        return "\n".join([*(line.rstrip() for line in lines), *notes])


def _parts_text(row: Symmetry) -> str:
    broken = row.broken_by
    if not broken:
        return "all keep"
    shown = ", ".join(map(str, broken[:8])) + (", …" if len(broken) > 8 else "")
    count = "all" if len(broken) == len(row.parts) else f"{len(broken)} of {len(row.parts)}"
    warning = "" if not row.kept else "; may drift" if row.quantity is not None else "; may be lost"
    return f"{count} break ({shown}){warning}"


def row(
    name: str, meaning: str, judged: list[Operator], keeps: Callable[[Operator], bool], quantity: Operator | None = None
) -> Symmetry:
    kept, *parts = map(keeps, judged)
    return Symmetry(name, meaning, kept, tuple(parts), quantity)
