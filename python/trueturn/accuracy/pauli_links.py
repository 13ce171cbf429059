"""Strings that are linked by brackets with the terms of a Hamiltonian, and the matrix of those brackets.

For strings P, Q that anticommute i[P, Q] = ±2 R, R the string of their product; the sign follows from writing each
string as i^y X^x Z^z, y its number of Y factors. A string G is linked to a string E where E is among those of i[H, G],
and then G is the product of E with a term of H.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn.errors import ArgumentError
from trueturn.operator import Operator

if TYPE_CHECKING:
    import scipy.sparse

__all__ = ["MOST_CANDIDATES", "LinkedStrings", "Links"]

MOST_CANDIDATES = 100_000
"""Candidate strings above which a range is refused: about a minute of search, and half a gigabyte."""

String = tuple[int, int]


@dataclass(frozen=True)
class LinkedStrings:
    """Candidates (columns), the strings that their brackets reach (rows), and the entries of the matrix."""

    columns: list[String]
    rows: dict[String, int]
    entries: tuple[list[int], list[int], list[float]]

    def matrix(self) -> scipy.sparse.csr_matrix:
        """Return the matrix of i[H, ·]: shape (rows, columns), float64."""
        import scipy.sparse  # slow to import, and few need it

        row, column, values = self.entries
        return scipy.sparse.csr_matrix((values, (row, column)), shape=(len(self.rows), len(self.columns)))

    def right_hand_side(self, operator: Operator) -> npt.NDArray[np.float64]:
        """Return the coefficients of an operator in the order of the rows; strings without a row are left out."""
        target = np.zeros(len(self.rows))
        for x, z, coefficient in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True):
            place = self.rows.get((x, z))
            if place is not None:
                target[place] = coefficient
        return target


class Links:
    """Brackets of single strings with a Hamiltonian.

    Parameters
    ----------
    hamiltonian : Operator
        Without identity term.
    """

    def __init__(self, hamiltonian: Operator) -> None:
        self._qubits = hamiltonian.qubits
        self._terms = [
            (int(x), int(z), float(c))
            for x, z, c in zip(hamiltonian.x_masks, hamiltonian.z_masks, hamiltonian.coefficients, strict=True)
        ]
        self._at: list[list[int]] = [[] for _ in range(self._qubits)]
        neighbours = [1 << qubit for qubit in range(self._qubits)]
        for number, (x, z, _) in enumerate(self._terms):
            for qubit in _bits(x | z):
                self._at[qubit].append(number)
                neighbours[qubit] |= x | z
        self._within = [[1 << qubit for qubit in range(self._qubits)], neighbours]
        self._diameters: dict[int, int] = {}

    def diameter(self, support: int) -> int:
        """Return the most bonds between two qubits of a mask; `qubits` where two of them are not connected."""
        found = self._diameters.get(support)
        if found is None:
            found = self._diameters[support] = max(
                (self._radius(qubit, support) for qubit in _bits(support)), default=0
            )
        return found

    def _radius(self, qubit: int, support: int) -> int:
        for distance in range(self._qubits):
            if support & ~self._ball(qubit, distance) == 0:
                return distance
        return self._qubits

    def _ball(self, qubit: int, distance: int) -> int:
        """The qubits within so many bonds of a qubit, as a mask."""
        while len(self._within) <= distance:
            last = self._within[-1]
            grown = []
            for mask in last:
                wider = mask
                for other in _bits(mask):
                    wider |= self._within[1][other]
                grown.append(wider)
            self._within.append(grown)
        return self._within[distance][qubit]

    def bracket(self, x: int, z: int) -> Iterator[tuple[String, float]]:
        """Yield the strings of i[H, P] with their coefficients; no string comes twice."""
        seen: set[int] = set()
        for qubit in _bits(x | z):
            for number in self._at[qubit]:
                if number in seen:
                    continue
                seen.add(number)
                hx, hz, coefficient = self._terms[number]
                if ((hx & z).bit_count() + (hz & x).bit_count()) % 2:
                    made = hx ^ x, hz ^ z
                    yield made, 2.0 * coefficient * _sign(hx, hz, x, z, made)

    def linked(self, errors: list[String], weight: int, diameter: int) -> LinkedStrings:
        """Find all candidates within a range that chains of brackets link to the strings of an error.

        Raises
        ------
        ArgumentError
            There are more than `MOST_CANDIDATES`.
        """
        columns: list[String] = []
        known: set[String] = set()
        rows: dict[String, int] = {}
        waiting = list(dict.fromkeys(errors))
        row_of: list[int] = []
        column_of: list[int] = []
        values: list[float] = []
        for string in waiting:
            rows[string] = len(rows)
        while waiting:
            for candidate, _ in self.bracket(*waiting.pop()):
                if candidate in known:
                    continue
                known.add(candidate)
                support = candidate[0] | candidate[1]
                if support.bit_count() > weight or self.diameter(support) > diameter:
                    continue
                if len(columns) == MOST_CANDIDATES:
                    raise ArgumentError(
                        f"weight: more than {MOST_CANDIDATES} strings are in range (weight {weight}, diameter "
                        f"{diameter}); give a smaller weight or diameter",
                        argument="weight",
                        value=weight,
                    )
                for reached, coefficient in self.bracket(*candidate):
                    if reached not in rows:
                        rows[reached] = len(rows)
                        waiting.append(reached)
                    row_of.append(rows[reached])
                    column_of.append(len(columns))
                    values.append(coefficient)
                columns.append(candidate)
        return LinkedStrings(columns, rows, (row_of, column_of, values))


def _sign(hx: int, hz: int, x: int, z: int, made: String) -> int:
    """The sign of i[P, Q] / 2 for strings that anticommute: PQ = ±i R, so i PQ = ∓R."""
    turns = (hx & hz).bit_count() + (x & z).bit_count() - (made[0] & made[1]).bit_count() + 2 * (hz & x).bit_count()
    return -1 if turns % 4 == 1 else 1


def _bits(mask: int) -> Iterator[int]:
    while mask:
        low = mask & -mask
        yield low.bit_length() - 1
        mask ^= low
