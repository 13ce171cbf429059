"""From stages and parts to rotations: merge equal neighbours, repeat blocks instead of writing them out.

A step is a list of runs, a run being one part with a weight. Wherever a forward stage meets a reverse one,
the part at the seam runs twice; the two runs add up to one, and where they cancel exactly, their neighbours
meet and merge in turn. The same happens between steps. With r steps of a·M·b whose first and last run are of
the same part,

    (a M b)^r  =  a · (M (b+a))^(r-1) · M b,

so the middle is one block with a repeat count and a million steps take the memory of two. Where b + a is
exactly zero, what is left is a · M^r · b, and M is treated likewise. A single run only adds its weight up.

Weights are added as exact fractions, hence "exactly zero" means just that: almost-zero runs stay.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

from trueturn.errors import ArgumentError
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["ANGLE_ROUNDINGS", "rotations_of"]

ANGLE_ROUNDINGS = 2
"""Roundings in the angle of any rotation: one in weight·time/steps, one in its product with the coefficient.

Weights, time, steps and coefficients count as the exact numbers that the floats are, sums of weights are
exact, and an angle that collects several runs of one string is rounded once. So an angle θ is off by at most
(2u + u²)|θ|, with u the unit roundoff, unless it underflows.
"""

Run = tuple[int, Fraction]
Block = tuple[list[Run], int]
Columns = tuple[list[int], list[int], list[float]]


def rotations_of(stages: Sequence[tuple[Fraction, bool]], partition: Partition, time: float, steps: int) -> Rotations:
    """Build the circuit of `steps` equal steps; see `Formula.rotations`."""
    runs = merged_runs(stages, len(partition.parts))
    writer = _Writer(partition, Fraction(time) / steps)
    phase = 0.0 - partition.identity * time
    if not math.isfinite(phase):
        raise _too_large(time)
    circuit = Rotations([], [], [], partition.qubits, phase=phase)
    for block, repeat in repeated(runs, steps):
        circuit = circuit + writer.rotations(block).times(repeat)
    return circuit


def merged_runs(stages: Sequence[tuple[Fraction, bool]], parts: int) -> list[Run]:
    """List the runs of one step, equal neighbours merged and exact zeros dropped.

    Parameters
    ----------
    stages : sequence of (Fraction, bool)
        Weight, and whether the stage is a reverse one.
    parts : int

    Returns
    -------
    list of (part number, weight)
        No two neighbours of the same part, no weight of zero.
    """
    runs: list[Run] = []
    for weight, reverse in stages:
        if weight == 0:
            continue
        for part in reversed(range(parts)) if reverse else range(parts):
            if runs and runs[-1][0] == part:
                total = runs.pop()[1] + weight
                if total:
                    runs.append((part, total))
            else:
                runs.append((part, weight))
    return runs


def repeated(runs: list[Run], steps: int) -> list[Block]:
    """Repeat merged runs, merging across the seams between repeats.

    Returns
    -------
    list of (runs, repeat)
        At most one block of more than one repeat; no empty block.
    """
    before: list[Run] = []
    after: list[Run] = []
    while len(runs) > 1 and steps > 1 and runs[0][0] == runs[-1][0] and runs[0][1] + runs[-1][1] == 0:
        before.append(runs[0])
        after.append(runs[-1])
        runs = runs[1:-1]
    after.reverse()
    if not runs:
        return []
    if len(runs) == 1:
        return [([*before, (runs[0][0], steps * runs[0][1]), *after], 1)]
    if steps == 1:
        return [(before + runs + after, 1)]
    if runs[0][0] != runs[-1][0]:
        blocks: list[Block] = [(before, 1), (runs, steps), (after, 1)]
    else:
        (part, first), middle, (_, last) = runs[0], runs[1:-1], runs[-1]
        seam = [(part, last + first)]
        head, tail = [*before, (part, first)], [*middle, (part, last), *after]
        if steps == 2:
            return [(head + middle + seam + tail, 1)]
        blocks = [(head, 1), (middle + seam, steps - 1), (tail, 1)]
    return [(block, repeat) for block, repeat in blocks if block]


class _Writer:
    """Turns runs into rotations of one partition."""

    def __init__(self, partition: Partition, step: Fraction) -> None:
        self.qubits = partition.qubits
        self.step = step
        self.x: list[list[int]] = [part.x_masks.tolist() for part in partition.parts]
        self.z: list[list[int]] = [part.z_masks.tolist() for part in partition.parts]
        self.coefficients: list[list[float]] = [part.coefficients.tolist() for part in partition.parts]
        strings = [pair for xs, zs in zip(self.x, self.z, strict=True) for pair in zip(xs, zs, strict=True)]
        self.shared = len(set(strings)) < len(strings)

    def rotations(self, runs: list[Run]) -> Rotations:
        x, z, angles = self._merging_strings(runs) if self.shared else self._part_by_part(runs)
        if not all(map(math.isfinite, angles)):
            raise _too_large(float(self.step))
        if not all(angles):
            kept = [place for place, angle in enumerate(angles) if angle]
            x, z, angles = [x[k] for k in kept], [z[k] for k in kept], [angles[k] for k in kept]
        return Rotations(x, z, angles, self.qubits)

    def _part_by_part(self, runs: list[Run]) -> Columns:
        x: list[int] = []
        z: list[int] = []
        angles: list[float] = []
        scales: dict[int, float] = {}  # by identity of the weight, which the runs of a stage share
        for part, weight in runs:
            if id(weight) not in scales:
                scales[id(weight)] = _float(weight * self.step)
            scale = scales[id(weight)]
            x += self.x[part]
            z += self.z[part]
            angles += [scale * value for value in self.coefficients[part]]
        return x, z, angles

    def _merging_strings(self, runs: list[Run]) -> Columns:
        """Merge equal strings that meet where one part ends and another begins."""
        entries: list[tuple[tuple[int, int], list[tuple[Fraction, float]]]] = []
        for part, weight in runs:
            strings = zip(self.x[part], self.z[part], strict=True)
            for string, value in zip(strings, self.coefficients[part], strict=True):
                if entries and entries[-1][0] == string:
                    entries[-1][1].append((weight, value))
                    if not _exact(entries[-1][1]):
                        entries.pop()
                else:
                    entries.append((string, [(weight, value)]))
        return (
            [x for (x, _), _ in entries],
            [z for (_, z), _ in entries],
            [self._angle(sources) for _, sources in entries],
        )

    def _angle(self, sources: list[tuple[Fraction, float]]) -> float:
        if len(sources) == 1:
            (weight, value), *_ = sources
            return _float(weight * self.step) * value
        return _float(_exact(sources) * self.step)


def _exact(sources: list[tuple[Fraction, float]]) -> Fraction:
    return sum((weight * Fraction(value) for weight, value in sources), Fraction(0))


def _float(number: Fraction) -> float:
    """Round correctly."""
    try:
        return float(number)
    except OverflowError:
        return math.copysign(math.inf, number)


def _too_large(time: float) -> ArgumentError:
    return ArgumentError(
        f"time: makes an angle too large for a float ({time!r}); use a shorter time or smaller coefficients",
        argument="time",
        value=time,
    )
