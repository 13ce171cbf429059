"""Encodings of fermion modes in qubits: which sums of occupations the qubits hold.

An encoding is an invertible matrix A over GF(2): qubit i holds Σ_j A_ij f_j of the occupations f. The Jordan-Wigner
transformation has A = 1, the parity encoding sums all modes up to i, the Bravyi-Kitaev encoding those that a binary tree
puts together. Since |f> ↦ |A f> is a permutation of basis states made of controlled NOTs, it takes strings to strings:

    X^x Z^z ↦ X^(A x) Z^(A^-T z),

and with P = i^|x∧z| X^x Z^z the sign is (-1)^((y - y')/2) for y Y factors before and y' after. So one Jordan-Wigner operator
serves every encoding, and all of them have the same spectrum by construction.
"""

from __future__ import annotations

import difflib
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _arguments
from trueturn.chemistry import _masks
from trueturn.chemistry._masks import Words
from trueturn.errors import ArgumentError
from trueturn.operator import Operator

__all__ = ["ENCODINGS", "Encoding", "checked_encoding", "checked_sector", "encode"]

ENCODINGS = ("jordan-wigner", "parity", "bravyi-kitaev")
"""Names of the encodings."""

Bits = npt.NDArray[np.uint8]
_CHUNK = 1 << 17


class Encoding:
    """A named encoding on some modes, with or without the two qubits that hold parities.

    Parameters
    ----------
    name : str
        One of `ENCODINGS`.
    modes : int
    sector : (int, int), optional
        Numbers of electrons with spin up, in the first half of the modes, and down, in the second. The two qubits that hold
        the parity of the former and of all are then dropped, at the values that these numbers fix.
    """

    def __init__(self, name: str, modes: int, sector: tuple[int, int] | None = None) -> None:
        self.name, self.modes = checked_encoding(name), modes
        self.matrix = _matrix(name, modes)
        self.inverse = _inverted(self.matrix)
        self.kept = np.arange(modes)
        self._fixed: list[tuple[int, int]] = []
        if sector is not None:
            self._drop(checked_sector(sector, modes))

    @property
    def qubits(self) -> int:
        """Number of qubits that are left."""
        return int(self.kept.size)

    def strings(self, x: Words, z: Words, coefficients: npt.NDArray[np.float64]) -> tuple[Words, Words, Any]:
        """Take Jordan-Wigner strings, masks of shape (m, words), to this encoding.

        Raises
        ------
        ArgumentError
            Qubits are dropped, and a string changes a parity that they hold.
        """
        parts = [
            self._some(x[begin : begin + _CHUNK], z[begin : begin + _CHUNK], coefficients[begin : begin + _CHUNK])
            for begin in range(0, max(1, len(coefficients)), _CHUNK)
        ]
        new_x, new_z, values = (np.concatenate(column) for column in zip(*parts, strict=True))
        return new_x, new_z, values

    def _some(self, x: Words, z: Words, coefficients: npt.NDArray[np.float64]) -> tuple[Words, Words, Any]:
        x_bits = _product(_masks.to_bits(x, self.modes), self.matrix.T)
        z_bits = _product(_masks.to_bits(z, self.modes), self.inverse)
        before = _masks.counts(x & z)
        after = (x_bits & z_bits).sum(axis=1, dtype=np.int64)
        odd = (before - after) // 2 % 2
        for qubit, value in self._fixed:
            if x_bits[:, qubit].any():
                raise ArgumentError(
                    "operator: changes the number of electrons with spin up or down by an odd number "
                    f"(qubit {qubit} of the encoding is not conserved); keep all qubits",
                    argument="operator",
                    value=qubit,
                )
            odd ^= z_bits[:, qubit] & value
        return (
            _masks.from_bits(x_bits[:, self.kept]),
            _masks.from_bits(z_bits[:, self.kept]),
            np.where(odd == 1, -coefficients, coefficients),
        )

    def basis_state(self, occupations: npt.NDArray[Any]) -> str:
        """Return the product state of given occupations, shape (modes,), as text of 0 and 1, qubit 0 first."""
        held = _product(occupations[None, :].astype(np.uint8), self.matrix.T)[0]
        return "".join(str(bit) for bit in held[self.kept])

    def _drop(self, sector: tuple[int, int]) -> None:
        up, down = sector
        halves = np.zeros((2, self.modes), dtype=np.uint8)
        halves[0, : self.modes // 2] = 1
        halves[1] = 1
        for parity, value in zip(_product(halves, self.inverse), (up, up + down), strict=True):
            places = np.flatnonzero(parity)
            if places.size != 1:
                remedy = "use encoding='parity'" + (
                    ", or a power of two of orbitals" if self.name == "bravyi-kitaev" else ""
                )
                raise ArgumentError(
                    f"drop_parity_qubits: no single qubit holds the parity here ({self.name}, {self.modes} modes); {remedy}",
                    argument="drop_parity_qubits",
                    value=self.name,
                )
            self._fixed.append((int(places[0]), value % 2))
        self.kept = np.array([q for q in range(self.modes) if q not in dict(self._fixed)], dtype=np.intp)
        if not self.kept.size:
            raise ArgumentError(
                f"drop_parity_qubits: leaves no qubit (of {self.modes}); keep them",
                argument="drop_parity_qubits",
                value=True,
            )


def encode(operator: Operator, encoding: str, *, sector: tuple[int, int] | None = None) -> Operator:
    """Take an operator from the Jordan-Wigner transformation to another encoding.

    Parameters
    ----------
    operator : Operator
        Made by the Jordan-Wigner transformation, qubit j for mode j, |1> filled; such as `trueturn.model.hubbard`.
    encoding : "jordan-wigner", "parity" or "bravyi-kitaev"
        Parity: qubit i holds the parity of modes 0 to i. Bravyi-Kitaev: qubit i holds the parity of the last 2^k modes up to
        i, 2^k being the largest power of two that divides i + 1.
    sector : (int, int), optional
        Numbers of electrons with spin up and down. The modes must be in order of spin, all with spin up first, and the
        operator must conserve both parities; the two qubits that hold them are dropped, and what is left acts on that sector
        of parities alone. With "parity" always possible; with "bravyi-kitaev" for a power of two of orbitals.

    Returns
    -------
    Operator
        Same number of terms; with `sector` at most as many, on two qubits less.

    Raises
    ------
    ArgumentError
        `operator` is no operator; the encoding is unknown; or qubits cannot be dropped.

    Notes
    -----
    Cost: a product of bit matrices, O(terms × qubits²) bit operations.

    References
    ----------
    S. B. Bravyi, A. Yu. Kitaev, Ann. Phys. 298, 210 (2002); J. T. Seeley, M. J. Richard, P. J. Love, J. Chem. Phys. 137,
    224109 (2012), section III; S. Bravyi, J. M. Gambetta, A. Mezzacapo, K. Temme, arXiv:1701.08213, section VI (dropping
    qubits). From memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> hop = tt.model.hubbard(tt.lattice.chain(2), hopping=1, repulsion=0)
    >>> print(tt.chemistry.encode(hop, "parity"))
    0.5 Y_0 Y_1 + 0.5 X_0 X_1 Z_2 + 0.5 Y_1 Y_2 + 0.5 Z_0 X_1 X_2 Z_3
    """
    if not isinstance(operator, Operator):
        raise ArgumentError(
            f"operator: no Operator ({type(operator).__name__}); make one by trueturn.model.hubbard or read_fcidump",
            argument="operator",
            value=operator,
        )
    target = Encoding(encoding, operator.qubits, sector)
    x, z, coefficients = target.strings(
        _masks.from_integers(operator.x_masks, operator.qubits),
        _masks.from_integers(operator.z_masks, operator.qubits),
        operator.coefficients,
    )
    return Operator.from_masks(_masks.integers(x), _masks.integers(z), coefficients, target.qubits)


def checked_encoding(name: object) -> str:
    """Return the name of an encoding; an unknown one is refused with the nearest that is known."""
    if isinstance(name, str) and name in ENCODINGS:
        return name
    close = difflib.get_close_matches(str(name), ENCODINGS, n=1)
    remedy = f"did you mean {close[0]!r}?" if close else f"give one of {', '.join(map(repr, ENCODINGS))}"
    raise ArgumentError(f"encoding: unknown ({name!r}); {remedy}", argument="encoding", value=name)


def checked_sector(sector: object, modes: int) -> tuple[int, int]:
    """Return the numbers of electrons with spin up and down, which must fit into `modes` spin orbitals."""
    try:
        up, down = (_arguments.qubit_number(count, modes // 2 + 1, "electrons", "electrons") for count in sector)  # type: ignore[attr-defined]
    except (TypeError, ValueError):
        raise ArgumentError(
            f"electrons: no numbers of spin up and down that fit into {modes // 2} orbitals ({sector!r}); "
            "give a pair such as (1, 1)",
            argument="electrons",
            value=sector,
        ) from None
    if modes % 2:
        raise ArgumentError(
            f"electrons: an odd number of spin orbitals ({modes}) has no halves of spin up and down; keep all qubits",
            argument="electrons",
            value=sector,
        )
    return up, down


def _matrix(name: str, modes: int) -> Bits:
    """Return A: entry (i, j) is 1 where qubit i counts mode j."""
    qubit, mode = np.indices((modes, modes))
    lowest = (qubit + 1) & -(qubit + 1)
    first = {"jordan-wigner": qubit, "parity": np.zeros_like(qubit), "bravyi-kitaev": qubit + 1 - lowest}[name]
    matrix: Bits = ((first <= mode) & (mode <= qubit)).astype(np.uint8)
    return matrix


def _inverted(matrix: Bits) -> Bits:
    """Return the inverse over GF(2) of a lower triangular matrix with ones on the diagonal, by forward substitution."""
    inverse = np.eye(len(matrix), dtype=np.uint8)
    for row in range(len(matrix)):
        below = np.flatnonzero(matrix[row, :row])
        inverse[row] ^= np.bitwise_xor.reduce(inverse[below], axis=0)
    return inverse


def _product(left: Bits, right: Bits) -> Bits:
    """Return a product over GF(2); single precision counts to 2^24 exactly, and there are at most 128 ones."""
    counted = left.astype(np.float32) @ right.astype(np.float32)
    found: Bits = (counted.astype(np.int64) & 1).astype(np.uint8)
    return found
