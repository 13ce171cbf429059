"""The error of one circuit against the reference, as intervals."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from trueturn import _native
from trueturn.audit.base_candidate import BaseCandidate, Leg, circuits_from_start, gates_and_depth
from trueturn.audit.figures import upper
from trueturn.audit.grid import grid_unit, steps_at
from trueturn.audit.result import PointError, Trial
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Reference
from trueturn.reference.certificate import UNIT, expectation_rounding, expectation_shift, norm_bound
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["Bench", "Measured", "judge"]

# A norm further from that of the start than this is no rounding; the reader is told.
_LOST_NORM = 1e-6


@dataclass(frozen=True)
class Measured:
    """A trial with all that went into it; the circuit is None where only its effect is known."""

    trial: Trial
    points: tuple[PointError, ...]
    rounding: float
    circuit: Rotations | None
    note: str = ""


def judge(error: tuple[float, float], tolerance: float) -> str:
    """Return the verdict on an error interval."""
    if error[1] <= tolerance:
        return "meets"
    return "misses" if error[0] > tolerance else "undecided"


@dataclass
class Bench:
    """A start, a reference and what is watched: everything a candidate is measured against.

    `times` are ascending, distinct and positive. `work` is a second state vector that circuits evolve; `start` stays
    as it is.
    """

    start: State
    times: Sequence[float]
    reference: Reference
    tolerance: float
    quantity: str
    observables: Mapping[str, Operator]
    relative_to: str | None
    readout: str
    threads: int
    norms: Mapping[str, float] = field(init=False)
    _bare: Mapping[str, Operator] = field(init=False)
    _constants: Mapping[str, float] = field(init=False)
    unit: float = field(init=False)
    _length: float = field(init=False)
    _start_length: float = field(init=False)
    _work: State = field(init=False)
    _expectation_rounding: Mapping[str, float] = field(init=False)

    def __post_init__(self) -> None:
        single = self.start.dtype == np.dtype(np.complex64)
        self.unit = 2.0**-24 if single else UNIT
        self.norms = {name: norm_bound(observable) for name, observable in self.observables.items()}
        self._expectation_rounding = {
            name: expectation_rounding(observable, self.start.qubits) * (self.unit / UNIT)
            for name, observable in self.observables.items()
        }
        # An identity term counts with the norm of the start on both sides, so that it cannot spoil the comparison.
        length = self.start.norm(threads=self.threads)
        squared = length**2
        self._start_length = length
        self._length = max(1.0, length)
        self._bare = {name: observable.without_identity() for name, observable in self.observables.items()}
        self._constants = {name: o.identity_coefficient * squared for name, o in self.observables.items()}
        self._work = self.start.copy()

    def step_unit(self) -> int:
        """Step counts that fit are the multiples of this."""
        return grid_unit(self.times) if self.readout == "along" else 1

    def measure(self, candidate: BaseCandidate, partition: Partition | None, steps: int) -> Measured:
        """Run a candidate with `steps` steps and compare it with the reference at every time."""
        legs = self.legs(candidate, partition, steps)
        *_, whole = circuits_from_start(legs)
        points: list[PointError] = []
        spent = 0.0
        lost = 0.0
        np.copyto(self._work.amplitudes, self.start.amplitudes)
        for place, leg in enumerate(legs):
            if leg.fresh and place:
                np.copyto(self._work.amplitudes, self.start.amplitudes)
            spent = self._length * leg.rounding(self.unit) + (0.0 if leg.fresh else spent)
            leg.run(self._work, self.threads)
            length = None
            if leg.circuit is None:
                length = self._work.norm(threads=self.threads)
                lost = max(lost, abs(length - self._start_length))
            points.extend(self._compare(place, spent, length))
        error = (max(point.error[0] for point in points), max(point.error[1] for point in points))
        gates = None if whole is None else gates_and_depth(whole)[0]
        trial = Trial(steps, error, judge(error, self.tolerance), gates)
        note = f"not unitary: the norm is off by {upper(lost)}" if lost > _LOST_NORM else ""
        return Measured(trial, tuple(points), spent, whole, note)

    def legs(self, candidate: BaseCandidate, partition: Partition | None, steps: int) -> list[Leg]:
        """Return what is run: from time to time along one circuit, or from the start to each time."""
        along = self.readout == "along"
        counts = steps_at(self.times, steps) if along and candidate.on_grid else [steps] * len(self.times)
        return candidate.legs(partition, self.times, counts, along)

    def _compare(self, place: int, rounding: float, length: float | None) -> list[PointError]:
        """Compare at one time; `length` is the norm of what an implementation gave, None where ours keeps it."""
        if self.quantity == "state":
            return [self._state_error(place, rounding)]
        values = self._work.expectations([self._bare[name] for name in self.observables], threads=self.threads)
        pairs = zip(self.observables, values, strict=True)
        return [self._observable_error(place, name, float(value), rounding, length) for name, value in pairs]

    def _observable_error(
        self, place: int, name: str, value: float, rounding: float, length: float | None
    ) -> PointError:
        constant = self._constants[name]
        longest = self._length
        blurred = 0.0
        if length is not None:
            identity = self.observables[name].identity_coefficient
            constant = identity * length**2
            longest = max(longest, length)
            # The squared norm is a sum as long as an expectation's.
            blurred = abs(identity) * length**2 * UNIT * (136.0 + self.start.qubits)
        value += constant
        expected = float(self.reference.expectations[name][place])
        slack = (
            float(self.reference.expectation_bounds[name][place])
            + expectation_shift(self.norms[name], rounding, longest)
            + longest**2 * self._expectation_rounding[name]
            + blurred
        )
        scale = 1.0
        if self.relative_to == "norm":
            scale = self.norms[name] or 1.0
        measured = abs(value - expected)
        error = (max(0.0, measured - slack) / scale, (measured + slack) / scale)
        return PointError(self.times[place], name, value, expected, error)

    def _state_error(self, place: int, rounding: float) -> PointError:
        exact = self.reference.states[place]
        ours = self._work
        if ours.dtype != exact.dtype:
            ours = State.from_array(ours.amplitudes.astype(exact.dtype))
        measured = _native.distance(ours.amplitudes, exact.amplitudes, 1.0, self.threads)
        time = self.times[place]
        # The norm of the difference is summed in blocks: 128 additions in a row, 3 levels, then a tree.
        slack = rounding + self.reference.certificate.error_bound[time] + UNIT * measured * (136.0 + exact.qubits)
        return PointError(time, "state", float("nan"), float("nan"), (max(0.0, measured - slack), measured + slack))
