"""Step lengths that add up exactly, and the circuits of steps of any length."""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from typing import TypeAlias

import numpy as np

from trueturn.driven import Driven
from trueturn.driven.circuits import Clock, steps_of
from trueturn.driven.parts import driven_parts
from trueturn.errors import ArgumentError
from trueturn.formulas import Formula
from trueturn.formulas.merging import rotations_of
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["Circuits", "Ruler", "circuits_of"]

Circuits: TypeAlias = "_Static | _Driven"


class Ruler:
    """Time that is left, in whole multiples of the last binary digit of the total."""

    def __init__(self, total: float) -> None:
        self.unit = math.ulp(total)
        self.sign = math.copysign(1.0, total)
        self.whole = self.left = int(abs(total) / self.unit)

    @property
    def elapsed(self) -> float:
        return self.sign * (self.whole - self.left) * self.unit

    def cut(self, wanted: float) -> float:
        """Return a length near `wanted`; what it leaves is nothing, or no shorter than about half of it."""
        count = max(1, int(min(wanted / self.unit, 2.0**53)))
        if count >= self.left:
            count = self.left
        elif 2 * count > self.left:
            count = (self.left + 1) // 2
        return self.sign * count * self.unit

    def advance(self, length: float) -> None:
        self.left -= int(abs(length) / self.unit)


class _Static:
    """Circuits of a Hamiltonian that does not change."""

    def __init__(self, partition: Partition) -> None:
        self.partition = partition
        self.qubits = partition.qubits

    def size(self) -> float:
        return math.fsum(part.one_norm() for part in self.partition.parts)

    def step(self, method: Formula, elapsed: float, length: float) -> Rotations:
        return method.rotations(self.partition, length, 1)

    def whole(self, method: Formula, lengths: Sequence[float], total: float) -> Rotations:
        if not lengths:
            return Rotations([], [], [], self.qubits)
        shares = [Fraction(length) / Fraction(total) for length in lengths]
        stages = [(weight * share, reverse) for share in shares for weight, reverse in method.exact_stages()]
        return rotations_of(stages, self.partition, total, 1)


class _Driven:
    """Circuits of a Hamiltonian that depends on time."""

    def __init__(self, driven: Driven, rule: str | Partition, start: float) -> None:
        self.driven = driven
        self.parts = driven_parts(driven, rule)
        self.start = start
        self.qubits = driven.qubits
        self._clocks: dict[Formula, Clock] = {}

    def size(self) -> float:
        return self.driven.at(self.start).without_identity().one_norm()

    def step(self, method: Formula, elapsed: float, length: float) -> Rotations:
        begin = np.array([self.start + elapsed])
        return steps_of(self.driven, self._clock(method), self.parts, begin, np.array([length]))

    def whole(self, method: Formula, lengths: Sequence[float], total: float) -> Rotations:
        starts = self.start + np.concatenate(([0.0], np.add.accumulate(lengths)[:-1])) if lengths else np.zeros(0)
        return steps_of(self.driven, self._clock(method), self.parts, starts, np.array(lengths))

    def _clock(self, method: Formula) -> Clock:
        if method not in self._clocks:
            self._clocks[method] = Clock(method, len(self.parts))
        return self._clocks[method]


def circuits_of(system: object, rule: str | Partition, start: float) -> Circuits:
    """Return the maker of circuits of a Partition or a Driven."""
    if isinstance(system, Partition):
        return _Static(system)
    if isinstance(system, Driven):
        return _Driven(system, rule, start)
    raise ArgumentError(
        f"system: is neither Partition nor Driven ({system!r}); make one with Partition.of(operator, rule)",
        argument="system",
        value=system,
    )
