"""Circuits of driven Hamiltonians: where a formula reads the clock, and the angles that follow.

With the clock before the first part, a forward stage advances it and then runs the parts, a reverse stage runs them
backwards and then advances it. So a forward stage and the reverse one after it read the same time, and the runs of the
last part between them merge by adding weights. A reverse stage and the forward one after it read different times; the
runs of the first part between them still merge, by adding angles, because a part's strings commute at any two times.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from trueturn import _memory
from trueturn.driven.parts import DrivenPart
from trueturn.driven.strengths import value_of
from trueturn.errors import ArgumentError
from trueturn.formulas import Formula
from trueturn.formulas.structure import require_nothing
from trueturn.rotations import WRITTEN_OUT_LIMIT, Rotations

if TYPE_CHECKING:
    from trueturn.driven.hamiltonian import Driven

__all__ = ["BYTES_PER_ROTATION", "Clock", "equal_steps", "steps_of"]

Floats = npt.NDArray[np.float64]
Run = tuple[int, dict[Fraction, Fraction]]

BYTES_PER_ROTATION = 100
"""Two references and two masks of 16 bytes, and the angle up to five times, while a circuit is made."""

_FEW = 100_000
"""Asking how much memory there is takes longer than making so few rotations."""

CLOCK_SLACK = 2.0**-48
"""Share of |start| + |time| by which a reading may lie beyond the domain and count as its end."""


class Clock:
    """Where one step of a formula reads the clock, and the merged runs of its parts.

    Attributes
    ----------
    stages : list of (Fraction, Fraction)
        Weight of each stage, and the reading from which its strengths are frozen, in units of the step.
    readings : list of Fraction
        The distinct readings, ascending; outside of [0, 1] where weights are negative.
    runs : list of (part, {reading: weight})
        In order of time; no two neighbours of one part.

    Raises
    ------
    FormulaError
        The formula requires a structure of its parts, which strengths that change with time need not keep.

    Examples
    --------
    >>> import trueturn as tt
    >>> [str(reading) for reading in Clock(tt.formula("strang"), 2).readings]
    ['1/2']
    """

    def __init__(self, formula: Formula, parts: int) -> None:
        require_nothing(formula, "strengths that change with time do not keep that")
        self.stages: list[tuple[Fraction, Fraction]] = []
        self.runs: list[Run] = []
        now = Fraction(0)
        for weight, reverse in formula.exact_stages():
            reading = now if reverse else now + weight
            now += weight
            if not weight:
                continue
            self.stages.append((weight, reading))
            for part in reversed(range(parts)) if reverse else range(parts):
                self._run(part, reading, weight)
        self.readings = sorted({reading for _, reading in self.stages})

    def _run(self, part: int, reading: Fraction, weight: Fraction) -> None:
        if not self.runs or self.runs[-1][0] != part:
            self.runs.append((part, {reading: weight}))
            return
        weights = self.runs[-1][1]
        weights[reading] = weights.get(reading, Fraction(0)) + weight
        if not weights[reading]:
            del weights[reading]
        if not weights:
            self.runs.pop()

    @property
    def seam(self) -> bool:
        """Whether the last run of a step merges with the first of the next."""
        return bool(self.runs) and self.runs[0][0] == self.runs[-1][0]


def equal_steps(
    driven: Driven, clock: Clock, parts: Sequence[DrivenPart], start: float, time: float, steps: int
) -> Rotations:
    """Build the circuit of equal steps; see `Driven.rotations`."""
    _require_room(clock, parts, steps)
    # start and time may be of any size, so the share of each step is formed first
    starts = start + time * (np.arange(steps) / steps)
    return steps_of(driven, clock, parts, starts, np.full(steps, time / steps))


def steps_of(driven: Driven, clock: Clock, parts: Sequence[DrivenPart], starts: Floats, lengths: Floats) -> Rotations:
    """Build the circuit of steps that begin at `starts` and last `lengths`, each of shape (m,).

    Raises
    ------
    ArgumentError, MemoryRefusedError
        As for `Driven.rotations`.
    """
    _require_room(clock, parts, len(starts))
    table = _strengths(driven, clock, starts, lengths)
    phase = 0.0 - _identity_angle(driven, clock, lengths, table)
    writer = _Writer(parts, lengths, table)
    x, z, angles = writer.columns(clock)
    if not (np.isfinite(angles).all() and math.isfinite(phase)):
        raise ArgumentError(
            "time: makes an angle too large for a float; use a shorter time or smaller strengths",
            argument="time",
            value=float(np.abs(lengths).max(initial=0.0)),
        )
    if not angles.all():
        kept = np.flatnonzero(angles).tolist()
        x, z, angles = [x[k] for k in kept], [z[k] for k in kept], angles[kept]
    return Rotations(x, z, angles, driven.qubits, phase=phase)


def _identity_angle(driven: Driven, clock: Clock, lengths: Floats, table: dict[Fraction, Floats]) -> float:
    """Return the formula's quadrature of the identity's strength, term by term in order of time."""
    shares = [(term, operator.identity_coefficient) for term, (_, operator) in enumerate(driven.terms)]
    return math.fsum(
        angle
        for term, share in shares
        if share
        for weight, reading in clock.stages
        for angle in (lengths * float(weight) * table[reading][:, term] * share).tolist()
    )


def _require_room(clock: Clock, parts: Sequence[DrivenPart], steps: int) -> None:
    """Refuse too many rotations before any is made."""
    sizes = [len(parts[part].x) for part, _ in clock.runs]
    count = steps * sum(sizes) - ((steps - 1) * sizes[0] if clock.seam else 0)
    if count > WRITTEN_OUT_LIMIT:
        most = max(1, steps * WRITTEN_OUT_LIMIT // count)
        raise ArgumentError(
            f"steps: make {count} rotations, all different ({steps}); at most {WRITTEN_OUT_LIMIT} are written out, "
            f"so give {most} steps or fewer and join the circuits with +",
            argument="steps",
            value=steps,
        )
    if count > _FEW:
        _memory.require(BYTES_PER_ROTATION * count, "rotations")


def _strengths(driven: Driven, clock: Clock, starts: Floats, lengths: Floats) -> dict[Fraction, Floats]:
    """Return the strengths at each reading, shape (steps, terms)."""
    times = {reading: starts + lengths * float(reading) for reading in clock.readings}
    if not len(starts) or not times:
        return {reading: np.zeros((0, len(driven.terms))) for reading in times}
    low, high = driven.domain
    slack = CLOCK_SLACK * (float(np.abs(starts).max()) + float(np.abs(lengths).max()))
    table: dict[Fraction, Floats] = {}
    first = min(float(now.min()) for now in times.values())
    last = max(float(now.max()) for now in times.values())
    if first < low - slack or last > high + slack:
        driven.require_domain(first, last)
    for reading, now in times.items():
        inside = np.clip(now, low, high).tolist()
        table[reading] = np.array(
            [[value_of(strength, time) for strength, _ in driven.terms] for time in inside], dtype=np.float64
        )
    return table


class _Writer:
    """Turns the runs of all steps into columns of masks and angles."""

    def __init__(self, parts: Sequence[DrivenPart], lengths: Floats, table: dict[Fraction, Floats]) -> None:
        self.parts = parts
        self.lengths = lengths
        self.table = table

    def angles(self, run: Run) -> Floats:
        """Return the angles of one run, shape (steps, strings of its part)."""
        part, weights = run
        total: Floats = np.zeros((len(self.lengths), len(self.parts[part].x)))
        with np.errstate(over="ignore", invalid="ignore"):
            for reading, weight in weights.items():
                scales = self.lengths * float(weight)
                total += scales[:, None] * self.parts[part].coefficients(self.table[reading])
        return total

    def columns(self, clock: Clock) -> tuple[list[int], list[int], Floats]:
        runs = clock.runs
        steps = len(self.lengths)
        if not runs or not steps:
            return [], [], np.zeros(0)
        if not clock.seam:
            return self._written([run[0] for run in runs], [self.angles(run) for run in runs])
        first = self.angles(runs[0])
        if len(runs) == 1:  # all steps merge; added in order of time
            part = self.parts[runs[0][0]]
            return list(part.x), list(part.z), np.add.accumulate(first)[-1]
        seams = self.angles(runs[-1])
        seams[:-1] += first[1:]
        rest = [run[0] for run in runs[1:]]
        x, z, angles = self._written(rest, [*(self.angles(run) for run in runs[1:-1]), seams])
        opening = self.parts[runs[0][0]]
        return opening.x + x, opening.z + z, np.concatenate([first[0], angles])

    def _written(self, order: Sequence[int], angles: Sequence[Floats]) -> tuple[list[int], list[int], Floats]:
        steps = len(self.lengths)
        x = [mask for part in order for mask in self.parts[part].x] * steps
        z = [mask for part in order for mask in self.parts[part].z] * steps
        return x, z, np.concatenate(angles, axis=1).ravel()
