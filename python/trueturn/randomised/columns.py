"""Rotations of a sample while it is written: three lists that grow run by run."""

from __future__ import annotations

import math
from fractions import Fraction

from trueturn.formulas.merging import Run
from trueturn.partition import Partition
from trueturn.randomised.checks import refuse_long_time
from trueturn.rotations import Rotations

__all__ = ["Columns", "PartWriter", "append_run", "rounded"]


def rounded(number: Fraction) -> float:
    """Round an exact number once; infinite where it does not fit."""
    try:
        return float(number)
    except OverflowError:
        return math.copysign(math.inf, number)


def append_run(runs: list[Run], part: int, weight: Fraction) -> None:
    """Append a run, merged with the last one where that is of the same part; exact zeros vanish."""
    if runs and runs[-1][0] == part:
        weight += runs.pop()[1]
    if weight:
        runs.append((part, weight))


class Columns:
    """Masks and angles of a circuit under construction."""

    def __init__(self) -> None:
        self.x: list[int] = []
        self.z: list[int] = []
        self.angles: list[float] = []

    def rotations(self, qubits: int, phase: float, time: float) -> Rotations:
        """Make the circuit; angles that are exactly zero are dropped, and infinite ones are blamed on the time."""
        if not (math.isfinite(phase) and all(map(math.isfinite, self.angles))):
            raise refuse_long_time(time)
        kept = [place for place, angle in enumerate(self.angles) if angle]
        return Rotations(
            [self.x[k] for k in kept],
            [self.z[k] for k in kept],
            [self.angles[k] for k in kept],
            qubits,
            phase=phase,
        )


class PartWriter:
    """Writes runs of the parts of one partition; `step` is the time of one step."""

    def __init__(self, partition: Partition, step: Fraction) -> None:
        self._step = step
        self._x: list[list[int]] = [part.x_masks.tolist() for part in partition.parts]
        self._z: list[list[int]] = [part.z_masks.tolist() for part in partition.parts]
        self._coefficients: list[list[float]] = [part.coefficients.tolist() for part in partition.parts]
        self._scales: dict[Fraction, float] = {}

    def write(self, columns: Columns, part: int, weight: Fraction) -> None:
        """Append exp(-i weight step A_part): each angle is rounded twice, as in `Formula.rotations`."""
        scale = self._scales.get(weight)
        if scale is None:
            scale = self._scales[weight] = rounded(weight * self._step)
        columns.x += self._x[part]
        columns.z += self._z[part]
        columns.angles += [scale * value for value in self._coefficients[part]]
