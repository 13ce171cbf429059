"""Symmetries of a Hamiltonian, and which parts of a partition keep them.

A circuit of parts that all keep a symmetry keeps it exactly, at any step length. A part that breaks one which
the Hamiltonian has can let the conserved quantity drift: an error that shows at once in an experiment. (Parts
that break it one by one can still keep it together, as XX, YY and ZZ of a bond do in direct succession.)
Everything is decided in the Pauli algebra, on as many qubits as operators have:

- A conserved operator Q is kept by A where i[A, Q] vanishes (up to what rounding can leave).
- A relabelling of qubits is kept where the relabelled operator equals the operator.
- Complex conjugation turns Y into -Y and leaves X and Z: kept where each string has an even number of Y.
- Spin-flip time reversal (conjugation, then Y on every qubit) turns X, Y and Z into minus themselves: kept where
  each string has even weight.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from trueturn import _arguments, _memory
from trueturn.errors import ArgumentError, OperatorError, PartitionError
from trueturn.operator import Operator
from trueturn.partition import Partition

__all__ = ["Symmetries", "Symmetry", "symmetries"]

_RELATIVE = 2.0**-50  # coefficients equal up to eight units in the last place of the largest
Relabelling = Mapping[int, int]


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
        return "\n".join(line.rstrip() for line in lines)


def _parts_text(row: Symmetry) -> str:
    broken = row.broken_by
    if not broken:
        return "all keep"
    shown = ", ".join(map(str, broken[:8])) + (", …" if len(broken) > 8 else "")
    count = "all" if len(broken) == len(row.parts) else f"{len(broken)} of {len(row.parts)}"
    warning = "" if not row.kept else "; may drift" if row.quantity is not None else "; may be lost"
    return f"{count} break ({shown}){warning}"


def symmetries(
    operator: Operator,
    partition: Partition | None = None,
    *,
    also: Mapping[str, Operator | Relabelling] | None = None,
) -> Symmetries:
    """Find which symmetries a Hamiltonian has, and which of them each part keeps.

    Parameters
    ----------
    operator : Operator
    partition : Partition, optional
        Of this operator.
    also : mapping of str to Operator or mapping of int to int, optional
        Further symmetries to look at: a quantity that may be conserved, or a relabelling {old: new} that
        permutes the qubits.

    Returns
    -------
    Symmetries
        With these rows, on n qubits:

        - ``particle number``: Σ (1 - Z_q)/2, for spin orbitals under the Jordan-Wigner transformation; the same
          as ``spin z`` as far as conservation goes.
        - ``electron spin z``: Σ over pairs of qubits (2s, 2s+1) of (Z_{2s+1} - Z_{2s})/4, up before down as in
          `trueturn.model.hubbard`; for even n only.
        - ``spin x``, ``spin y``, ``spin z``: Σ X_q/2 and so on, of n spins 1/2.
        - ``spin squared``: (Σ X/2)² + (Σ Y/2)² + (Σ Z/2)².
        - ``parity x``, ``parity y``, ``parity z``: the product of X (Y, Z) over all qubits.
        - ``translation by d``: qubit q becomes q + d modulo n; d is the least divisor of n below n that is a
          symmetry, or 1 when there is none; for n of at least 2.
        - ``reflection``: qubit q becomes n - 1 - q; for n of at least 2.
        - ``conjugation``: time reversal without spin, complex conjugation in the Z basis.
        - ``spin-flip time reversal``: conjugation followed by Y on all qubits.
        - those of `also`.

    Raises
    ------
    OperatorError
        `operator` is not an Operator, or an entry of `also` is neither quantity nor permutation of its qubits.
    PartitionError
        `partition` is not a Partition, or does not sum to the operator.
    ArgumentError
        `also` is not a mapping, or a name in it is taken.

    Notes
    -----
    Brackets count as vanished as in `Operator.bracket_vanishes`; a relabelled operator as equal when no coefficient
    differs by more than 2⁻⁵⁰ times the largest. A sum of parts can have a symmetry that no part has, and
    never lacks one that all parts have. Cost is small beside anything done with states: the
    total spin squared has 3 n²/2 strings, and its bracket is left out where all three components are kept.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.symmetry import symmetries
    >>> h = tt.model.heisenberg(tt.lattice.ring(4), 1.0, z=0.5)
    >>> found = symmetries(h, tt.Partition.of(h, "axis"))
    >>> found["spin z"].kept, found["spin z"].broken_by
    (True, (0, 1))
    >>> print(found)
    symmetry                 Hamiltonian  parts
    particle number          keeps        2 of 3 break (0, 1); may drift
    electron spin z          breaks       2 of 3 break (0, 1)
    spin x                   breaks       2 of 3 break (1, 2)
    spin y                   breaks       2 of 3 break (0, 2)
    spin z                   keeps        2 of 3 break (0, 1); may drift
    spin squared             keeps        all break (0, 1, 2); may drift
    parity x                 breaks       1 of 3 break (2)
    parity y                 breaks       1 of 3 break (2)
    parity z                 keeps        all keep
    translation by 1         keeps        all keep
    reflection               keeps        all keep
    conjugation              keeps        all keep
    spin-flip time reversal  breaks       1 of 3 break (2)
    """
    if not isinstance(operator, Operator):
        raise OperatorError(
            f"operator: is not an Operator ({operator!r}); use trueturn.Operator or trueturn.model",
            argument="operator",
        )
    if partition is not None and not isinstance(partition, Partition):
        raise PartitionError(
            f"partition: is not a Partition ({partition!r}); make one with Partition.of(operator, rule)",
            argument="partition",
        )
    if partition is not None:
        partition.require_sum(operator)
    judged = [operator, *(partition.parts if partition is not None else ())]
    rows = [*_conserved(judged), *_relabellings(judged), *_reversals(judged)]
    for name, symmetry in _further(also, [row.name for row in rows]).items():
        rows.append(_custom(name, symmetry, judged))
    return Symmetries(tuple(rows))


def _row(
    name: str, meaning: str, judged: list[Operator], keeps: Callable[[Operator], bool], quantity: Operator | None = None
) -> Symmetry:
    kept, *parts = map(keeps, judged)
    return Symmetry(name, meaning, kept, tuple(parts), quantity)


def _conserved(judged: list[Operator]) -> list[Symmetry]:
    n = judged[0].qubits
    spins = {axis: _total(axis, n, [0.5] * n) for axis in "xyz"}
    number = _total("z", n, [-0.5] * n) + 0.5 * n
    rows = [_quantity("particle number", "Σ (1 - Z)/2, occupied spin orbitals", number, judged)]
    if n % 2 == 0:
        staggered = _total("z", n, [-0.25, 0.25] * (n // 2))
        rows.append(_quantity("electron spin z", "half of up minus down, on even and odd qubits", staggered, judged))
    components = [
        _quantity(f"spin {axis}", f"Σ {axis.upper()}/2 over all qubits", spin, judged) for axis, spin in spins.items()
    ]
    rows += [*components, _spin_squared(components, judged)]
    everywhere = (1 << n) - 1
    for axis, x, z in (("x", everywhere, 0), ("y", everywhere, everywhere), ("z", 0, everywhere)):
        parity = Operator.from_masks([x], [z], [1.0], n)
        rows.append(_quantity(f"parity {axis}", f"product of {axis.upper()} over all qubits", parity, judged))
    return rows


def _quantity(name: str, meaning: str, quantity: Operator, judged: list[Operator]) -> Symmetry:
    return _row(name, meaning, judged, _commuting_with(quantity), quantity)


def _commuting_with(quantity: Operator) -> Callable[[Operator], bool]:
    """`Operator.bracket_vanishes`, asking the system for its memory once instead of each time."""
    allowed = _memory.allowed_bytes()
    return lambda operator: quantity._terms.bracket_vanishes(operator._terms, allowed)


def _total(axis: str, qubits: int, weights: list[float]) -> Operator:
    bits = [1 << qubit for qubit in range(qubits)]
    none = [0] * qubits
    return Operator.from_masks(none if axis == "z" else bits, none if axis == "x" else bits, weights, qubits)


def _spin_squared(components: list[Symmetry], judged: list[Operator]) -> Symmetry:
    """Spare the bracket where all components are kept: what commutes with them commutes with their squares."""
    n = judged[0].qubits
    known = [all(each) for each in zip(*((row.kept, *row.parts) for row in components), strict=True)]
    kept, *parts = (
        sure or _squared(n, operator.support()).bracket_vanishes(operator)
        for sure, operator in zip(known, judged, strict=True)
    )
    return Symmetry("spin squared", "total spin, S(S + 1)", kept, tuple(parts), _squared(n, range(n)))


def _squared(qubits: int, touching: Sequence[int]) -> Operator:
    """3n/4 + Σ over pairs of (XX + YY + ZZ)/2, without the pairs that touch none of some qubits."""
    pairs = sorted({1 << a | 1 << b for a in touching for b in range(qubits) if a != b})
    none = [0] * len(pairs)
    x, z = [*pairs, *pairs, *none, 0], [*none, *pairs, *pairs, 0]
    return Operator.from_masks(x, z, [0.5] * (3 * len(pairs)) + [0.75 * qubits], qubits)


def _relabellings(judged: list[Operator]) -> list[Symmetry]:
    n = judged[0].qubits
    if n < 2:
        return []
    shifts = {d: {q: (q + d) % n for q in range(n)} for d in range(1, n) if n % d == 0}
    shift = next((d for d, names in shifts.items() if _same_after(judged[0], names)), 1)
    mirror = {q: n - 1 - q for q in range(n)}
    return [
        _relabelling(f"translation by {shift}", f"qubit q becomes q + {shift} modulo {n}", shifts[shift], judged),
        _relabelling("reflection", f"qubit q becomes {n - 1} - q", mirror, judged),
    ]


def _relabelling(name: str, meaning: str, names: Relabelling, judged: list[Operator]) -> Symmetry:
    return _row(name, meaning, judged, lambda operator: _same_after(operator, names))


def _same_after(operator: Operator, names: Relabelling) -> bool:
    largest = float(np.max(np.abs(operator.coefficients), initial=0.0))
    return operator.relabel(names).near(operator, _RELATIVE * largest)


def _reversals(judged: list[Operator]) -> list[Symmetry]:
    def real(operator: Operator) -> bool:
        strings = zip(operator.x_masks, operator.z_masks, strict=True)
        return all((int(x) & int(z)).bit_count() % 2 == 0 for x, z in strings)

    def even(operator: Operator) -> bool:
        strings = zip(operator.x_masks, operator.z_masks, strict=True)
        return all((int(x) | int(z)).bit_count() % 2 == 0 for x, z in strings)

    return [
        _row("conjugation", "complex conjugation in the Z basis", judged, real),
        _row("spin-flip time reversal", "complex conjugation, then Y on all qubits", judged, even),
    ]


def _further(also: object, taken: list[str]) -> dict[str, object]:
    if also is None:
        return {}
    if not isinstance(also, Mapping) or not all(isinstance(name, str) for name in also):
        raise ArgumentError(
            f"also: is not a mapping of names ({also!r}); give {{name: Operator or {{old: new}}}}",
            argument="also",
            value=also,
        )
    for name in also:
        if name in taken:
            raise ArgumentError(
                f"also: has a name that is taken ({name!r}); choose another", argument="also", value=name
            )
    return dict(also)


def _custom(name: str, symmetry: object, judged: list[Operator]) -> Symmetry:
    n = judged[0].qubits
    if isinstance(symmetry, Operator):
        return _quantity(name, "given quantity", symmetry, judged)
    if not isinstance(symmetry, Mapping):
        raise OperatorError(
            f"also: {name!r} is neither Operator nor mapping ({symmetry!r}); give a quantity or {{old: new}}",
            argument="also",
        )
    old = [_arguments.qubit_number(qubit, n, f"old qubit of {name!r}", "also") for qubit in symmetry]
    new = [_arguments.qubit_number(qubit, n, f"new qubit of {name!r}", "also") for qubit in symmetry.values()]
    if sorted(old) != sorted(new):
        raise OperatorError(
            f"also: {name!r} does not permute qubits ({dict(symmetry)!r}); name each new qubit once, and among the old",
            argument="also",
        )
    return _relabelling(name, "given relabelling", dict(zip(old, new, strict=True)), judged)
