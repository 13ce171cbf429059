"""Rotations by multiples of π/4 are Clifford gates: move them to the end, and see what the others become.

A basis change written out as rotations hides a string: exp(-i π/4 P) followed by a rotation about Q and by
exp(+i π/4 P) is a rotation about i[P, Q]/2 where P and Q anticommute. With the Clifford gates C_1 … C_k so far,
every rotation about Q becomes one about C_1† … C_k† Q C_k … C_1, and the product of all Clifford gates is left at the
end. Where the circuit undid what it did, that is the identity.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trueturn.diagnosis.unfolding import Mask
from trueturn.rotations import Rotations

__all__ = ["MOST", "Moved", "moved_to_the_end"]

MOST = 100_000
"""Circuits of more rotations are not looked at in this way."""
QUARTER = math.pi / 4
SLACK = 1e-10
"""Angles this near to a multiple of π/4, in radians, count as one."""

_Signed = tuple[int, int, int]  # x mask, z mask, exponent k of i^k in front of the product of letters X^x Z^z


class _Frame:
    """Images of X_q and Z_q under C† · C for the Clifford gates C so far; those not named are their own."""

    def __init__(self) -> None:
        self._images: dict[tuple[int, bool], _Signed] = {}

    def image(self, mask: Mask) -> tuple[Mask, float]:
        """Give the string that a string becomes, and its sign."""
        x, z = mask
        total: _Signed = (0, 0, (x & z).bit_count())  # Y = i X Z
        rest = x | z
        while rest:
            qubit = (rest & -rest).bit_length() - 1
            rest &= rest - 1
            for is_x, bit in ((True, x >> qubit & 1), (False, z >> qubit & 1)):
                if bit:
                    total = _times(total, self._of(qubit, is_x))
        new_x, new_z, power = total
        return (new_x, new_z), 1.0 if (power - (new_x & new_z).bit_count()) % 4 == 0 else -1.0

    def then(self, mask: Mask, quarters: int) -> None:
        """Add the gate exp(-i quarters π/4 P)."""
        image, sign = self.image(mask)
        own: _Signed = (*image, (image[0] & image[1]).bit_count() + (0 if sign > 0 else 2))
        x, z = mask
        rest = x | z
        while rest:
            qubit = (rest & -rest).bit_length() - 1
            rest &= rest - 1
            for is_x in (True, False):
                clash = (z if is_x else x) >> qubit & 1
                if not clash or quarters % 4 == 0:
                    continue
                old = self._of(qubit, is_x)
                # C† G C = exp(2i φ P) G for G that anticommutes with P and φ = quarters π/4
                if quarters % 4 == 2:
                    new = (old[0], old[1], old[2] + 2)
                else:
                    product = _times(own, old)
                    new = (product[0], product[1], product[2] + (1 if quarters % 4 == 1 else 3))
                self._images[qubit, is_x] = (new[0], new[1], new[2] % 4)

    def _of(self, qubit: int, is_x: bool) -> _Signed:
        bit = 1 << qubit
        return self._images.get((qubit, is_x), (bit, 0, 0) if is_x else (0, bit, 0))

    def residual(self) -> tuple[str, ...]:
        """Say what is left, generator by generator; empty for the identity."""
        left = []
        for (qubit, is_x), (x, z, power) in sorted(self._images.items()):
            bit = 1 << qubit
            if (x, z, power % 4) != ((bit, 0, 0) if is_x else (0, bit, 0)):
                left.append(f"{'X' if is_x else 'Z'}_{qubit}")
        return tuple(left)

    def relabelled(self) -> tuple[tuple[int, int], ...]:
        """Give (from, to) of each qubit moved, where the gates do nothing else; empty otherwise.

        With C† X_q C = X_p, what qubit p held is on qubit q afterwards.
        """
        moves = []
        for (qubit, is_x), (x, z, power) in sorted(self._images.items()):
            bits = x if is_x else z
            if power % 4 or bits.bit_count() != 1 or (z if is_x else x):
                return ()
            source = bits.bit_length() - 1
            if self._of(qubit, not is_x)[1 if is_x else 0] != bits:
                return ()
            if is_x and source != qubit:
                moves.append((source, qubit))
        return tuple(moves)


def _times(left: _Signed, right: _Signed) -> _Signed:
    """Multiply i^a X^x Z^z by i^b X^x' Z^z': moving Z^z past X^x' costs a sign for each shared qubit."""
    return (
        left[0] ^ right[0],
        left[1] ^ right[1],
        (left[2] + right[2] + 2 * (left[1] & right[0]).bit_count()) % 4,
    )


@dataclass(frozen=True)
class Moved:
    """A circuit with its Clifford gates moved to the end.

    Attributes
    ----------
    rotations : Rotations
        Those that are left, about their new strings.
    gates : int
        How many Clifford gates were moved.
    residual : tuple of str
        One-qubit operators that the product of the moved gates does not leave as they are; empty where it is the
        identity or a relabelling, but for a phase.
    relabelled : tuple of (int, int)
        (from, to) of the qubits that the product of the gates moves, where it does nothing but that.
    """

    rotations: Rotations
    gates: int
    residual: tuple[str, ...]
    relabelled: tuple[tuple[int, int], ...]
    _product: tuple[tuple[Mask, int], ...] = ()

    @property
    def phase(self) -> float:
        """Global phase in radians of the product of the moved gates where that is the identity but for a phase."""
        turns = [quarters * QUARTER for _, quarters in self._product]
        x, z = [mask[0] for mask, _ in self._product], [mask[1] for mask, _ in self._product]
        nothing = Rotations([], [], [], self.rotations.qubits)
        return nothing.with_frame(Rotations(x, z, turns, self.rotations.qubits)).phase

    def back(self, masks: Sequence[Mask]) -> list[tuple[Mask, float]]:
        """Turn strings P into C P C†, with C the product of the moved gates; new strings and signs."""
        frame = _Frame()
        for mask, quarters in reversed(self._product):
            frame.then(mask, -quarters)
        return [frame.image(mask) for mask in masks]


def moved_to_the_end(rotations: Rotations, nearest: bool = False) -> Moved | None:
    """Move Clifford gates to the end.

    Parameters
    ----------
    rotations : Rotations
    nearest : bool
        Whether to split every angle into its nearest multiple of π/4, which is moved, and a remainder. This undoes
        a rotation written in a gate set of fixed quarter turns and phases.

    Returns
    -------
    Moved or None
        None where there are no Clifford gates, or too many rotations to look.
    """
    if not 0 < rotations.count <= MOST:
        return None
    angles = rotations.angles
    quarters = np.rint(angles / QUARTER)
    left = angles - quarters * QUARTER
    clean = np.abs(left) <= SLACK * np.maximum(1.0, np.abs(quarters))
    if not np.any((clean | nearest) & (quarters != 0)):
        return None
    frame = _Frame()
    x: list[int] = []
    z: list[int] = []
    kept: list[float] = []
    gates: list[tuple[Mask, int]] = []
    columns = zip(
        rotations.x_masks.tolist(),
        rotations.z_masks.tolist(),
        angles.tolist(),
        quarters.astype(np.int64).tolist(),
        left.tolist(),
        clean.tolist(),
        strict=True,
    )
    for x_mask, z_mask, angle, turns, rest, is_clifford in columns:
        mask = (x_mask, z_mask)
        if is_clifford or (nearest and turns):
            frame.then(mask, turns)
            gates.append((mask, turns))
            if is_clifford:
                continue
            angle = rest
        image, sign = frame.image(mask)
        x.append(image[0])
        z.append(image[1])
        kept.append(sign * angle)
    moves = frame.relabelled()
    left_over = () if moves else frame.residual()
    rest = Rotations(x, z, kept, rotations.qubits, rotations.phase)
    return Moved(rest, len(gates), left_over, moves, tuple(gates))
