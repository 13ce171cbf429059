"""Fields that a Hamiltonian conserves, to be taken out of its expansion.

If B = Σ d_j Z_j commutes with H, then exp(-iHt) = exp(-iBt) exp(-i(H - B)t) exactly, and the first factor is one diagonal
pass. The spectrum of H - B may be much narrower: of a Heisenberg ring in a field, B is the mean field.

Let c(s) be what the strings with one x mask, and with one z mask outside of it, add up to where the qubits of the x mask
are in the basis state s. It maps s to its complement, and so changes Σ d_j Z_j by -2 Σ_{j in x} d_j (-1)^{s_j}: B commutes
with H exactly if this is 0 for each mask and each s with c(s) ≠ 0.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["NO_FIELD", "Field", "conserved_field"]

UNIT = 2.0**-53

# Longer x masks would mean more than 16 basis states; the qubits of such terms get no field.
_WIDEST = 4

# Beyond it, differences of fields could overflow.
_LARGEST = 2.0**1000

Row = list[tuple[int, int]]
"""Σ sign · d_qubit = 0, as pairs (qubit, sign)."""


@dataclass(frozen=True)
class Field:
    """Σ d_j Z_j, which commutes with the operator that it was found for.

    Attributes
    ----------
    strengths : tuple of (qubit, d)
        None of them 0.
    blur : float
        How far, in spectral norm, rounding takes the operator without the field from what it should be.
    """

    strengths: tuple[tuple[int, float], ...]
    blur: float

    @property
    def norm(self) -> float:
        """Spectral norm, rounded up."""
        return math.nextafter(math.fsum(abs(strength) for _, strength in self.strengths), math.inf)

    def taken_from(self, operator: Operator) -> Operator:
        """Return the operator without the field."""
        if not self.strengths:
            return operator
        return operator - _operator(dict(self.strengths), operator.qubits)

    def evolution(self, length: float, constant: float, qubits: int) -> Rotations:
        """Return exp(-i length (constant + Σ d_j Z_j)) as one diagonal pass."""
        masks = [0, *(1 << qubit for qubit, _ in self.strengths)]
        angles = [constant * length, *(strength * length for _, strength in self.strengths)]
        return Rotations([0] * len(masks), masks, angles, qubits)

    def rounding(self, length: float) -> float:
        """Bound what it adds to the rounding of an evolution.

        Each of its rotations costs 5 u, an angle is off by 3 u as a rounded product with a rounded difference of times,
        and the operator without the field is off by the blur.
        """
        return UNIT * (5.0 * len(self.strengths) + 3.0 * self.norm * length) + self.blur * length


NO_FIELD = Field((), 0.0)


def conserved_field(operator: Operator) -> Field:
    """Find d_j such that Σ d_j Z_j commutes with the operator exactly.

    Among fields that are the same but for signs on qubits linked by hopping or pairing, this is the one nearest to the
    operator's own Z terms, in mean square. `NO_FIELD` where it is 0, or all of the operator.

    Notes
    -----
    Coefficients must cancel exactly for a process to be absent; those of hopping terms such as c XX + c YY do. Two-qubit
    rows d_i ± d_j = 0 join qubits into classes; a row of another kind that the classes do not fulfil rules them out.
    """
    x_masks, z_masks = operator.x_masks.tolist(), operator.z_masks.tolist()
    terms = list(zip(x_masks, z_masks, operator.coefficients.tolist(), strict=True))
    own = {z.bit_length() - 1: c for x, z, c in terms if x == 0 and z.bit_count() == 1}
    if not own or max(map(abs, own.values())) > _LARGEST:
        return NO_FIELD
    classes = _Classes()
    others = []
    for row in _rows(terms):
        if len(row) == 2:
            (one, sign), (two, other) = row
            classes.join(one, two, -sign * other)
        else:
            others.append(row)
    for row in others:
        classes.require(row)
    strengths = classes.mean(own)
    bare = operator - _operator(strengths, operator.qubits) if strengths else operator
    if not strengths or not len(bare):
        return NO_FIELD
    # Each coefficient of a Z term is a rounded difference.
    changed = (abs(own.get(qubit, 0.0) - strength) for qubit, strength in strengths.items())
    return Field(tuple(strengths.items()), UNIT * (1.0 + 2.0**-50) * math.fsum(changed))


def _operator(strengths: Mapping[int, float], qubits: int) -> Operator:
    masks = [1 << qubit for qubit in strengths]
    return Operator.from_masks([0] * len(masks), masks, np.array(list(strengths.values())), qubits)


def _rows(terms: Sequence[tuple[int, int, float]]) -> Iterator[Row]:
    """Yield what must vanish for the field to commute with the terms."""
    gathered: dict[tuple[int, int], list[tuple[int, float]]] = {}
    for x, z, coefficient in terms:
        if x:
            gathered.setdefault((x, z & ~x), []).append((z & x, coefficient))
    for (x, _), parts in gathered.items():
        qubits = [qubit for qubit in range(x.bit_length()) if x >> qubit & 1]
        if len(qubits) > _WIDEST:
            yield from ([(qubit, 1)] for qubit in qubits)
            continue
        for number in range(1 << len(qubits)):
            state = sum(1 << qubit for place, qubit in enumerate(qubits) if number >> place & 1)
            if _acts(parts, state):
                yield [(qubit, -1 if state >> qubit & 1 else 1) for qubit in qubits]


def _acts(parts: Sequence[tuple[int, float]], state: int) -> bool:
    """Whether Σ c i^{|z|} (-1)^{|z & state|}, z running over the z masks inside the x mask, is not exactly 0."""
    real: list[float] = []
    imaginary: list[float] = []
    for z, coefficient in parts:
        count = z.bit_count()
        turns = count + 2 * (z & state).bit_count()
        signed = coefficient if turns & 2 == 0 else -coefficient
        (imaginary if count & 1 else real).append(signed)
    # The sum of fsum is rounded once, so that it is 0 only if the exact one is.
    return math.fsum(real) != 0.0 or math.fsum(imaginary) != 0.0


class _Classes:
    """Qubits whose fields are the same up to known signs; some classes have none."""

    def __init__(self) -> None:
        self._parents: dict[int, tuple[int, int]] = {}
        self._empty: set[int] = set()

    def root(self, qubit: int) -> tuple[int, int]:
        """Return the class's first qubit and the sign of this one's field against it."""
        sign = 1
        while qubit in self._parents:
            qubit, step = self._parents[qubit]
            sign *= step
        return qubit, sign

    def join(self, one: int, two: int, sign: int) -> None:
        """Make the fields of two qubits the same up to a sign."""
        (first, own), (second, other) = self.root(one), self.root(two)
        if first == second:
            if own * other != sign:
                self._empty.add(first)
            return
        self._parents[second] = first, own * other * sign
        if second in self._empty:
            self._empty.add(first)

    def require(self, row: Row) -> None:
        """Rule out the classes of a row that they do not fulfil."""
        sums: dict[int, int] = {}
        for qubit, sign in row:
            root, own = self.root(qubit)
            sums[root] = sums.get(root, 0) + sign * own
        self._empty.update(root for root, total in sums.items() if total)

    def mean(self, own: dict[int, float]) -> dict[int, float]:
        """Return the mean of given fields over each class, by qubit."""
        members: dict[int, list[tuple[int, int]]] = {}
        for qubit in {*own, *self._parents, *(root for root, _ in self._parents.values())}:
            root, sign = self.root(qubit)
            if root not in self._empty:
                members.setdefault(root, []).append((qubit, sign))
        found = {}
        for group in members.values():
            shares = [sign * own.get(qubit, 0.0) / len(group) for qubit, sign in group]
            mean = math.fsum(shares)
            if mean:
                found.update({qubit: sign * mean for qubit, sign in group})
        return dict(sorted(found.items()))
