"""The error of one circuit against the reference, as intervals."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from trueturn import _native
from trueturn.audit.candidate import Candidate
from trueturn.audit.grid import grid_unit, steps_at
from trueturn.audit.result import PointError, Trial
from trueturn.formulas import ANGLE_ROUNDINGS
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Reference
from trueturn.reference.certificate import UNIT, expectation_rounding, expectation_shift, norm_bound
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["SEGMENT_ROUNDINGS", "Bench", "Measured", "judge"]

# A segment's time is a difference of two requested times: one more rounding in each angle.
SEGMENT_ROUNDINGS = 1


@dataclass(frozen=True)
class Measured:
    """A trial with all that went into it."""

    trial: Trial
    points: tuple[PointError, ...]
    rounding: float
    circuit: Rotations


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
        self._length = max(1.0, length)
        self._bare = {name: observable.without_identity() for name, observable in self.observables.items()}
        self._constants = {name: o.identity_coefficient * squared for name, o in self.observables.items()}
        self._work = self.start.copy()

    def step_unit(self) -> int:
        """Step counts that fit are the multiples of this."""
        return grid_unit(self.times) if self.readout == "along" else 1

    def measure(self, candidate: Candidate, partition: Partition, steps: int) -> Measured:
        """Run a candidate with `steps` steps and compare it with the reference at every time."""
        circuits = self.circuits(candidate, partition, steps)
        whole = circuits[-1]
        if self.readout == "along":
            whole = circuits[0]
            for circuit in circuits[1:]:
                whole = whole + circuit
        points: list[PointError] = []
        spent = 0.0
        np.copyto(self._work.amplitudes, self.start.amplitudes)
        for place, circuit in enumerate(circuits):
            own = self._length * circuit.rounding_bound(ANGLE_ROUNDINGS + SEGMENT_ROUNDINGS, self.unit)
            if self.readout == "along":
                spent += own
            else:
                spent = own
                np.copyto(self._work.amplitudes, self.start.amplitudes)
            self._work.apply(circuit, threads=self.threads)
            points.extend(self._compare(place, spent))
        error = (max(point.error[0] for point in points), max(point.error[1] for point in points))
        trial = Trial(steps, error, judge(error, self.tolerance), whole.two_qubit_gates())
        return Measured(trial, tuple(points), spent, whole)

    def circuits(self, candidate: Candidate, partition: Partition, steps: int) -> list[Rotations]:
        """Return the circuits that are run: from time to time along one, or from 0 to each time."""
        if self.readout != "along":
            return [candidate.formula.rotations(partition, time, steps) for time in self.times]
        counts = steps_at(self.times, steps)
        circuits = []
        for now, was, count, before in zip(self.times, [0.0, *self.times[:-1]], counts, [0, *counts[:-1]], strict=True):
            circuits.append(candidate.formula.rotations(partition, now - was, count - before))
        return circuits

    def _compare(self, place: int, rounding: float) -> list[PointError]:
        if self.quantity == "state":
            return [self._state_error(place, rounding)]
        return [self._observable_error(place, name, rounding) for name in self.observables]

    def _observable_error(self, place: int, name: str, rounding: float) -> PointError:
        value = self._constants[name] + self._work.expectation(self._bare[name], threads=self.threads)
        expected = float(self.reference.expectations[name][place])
        slack = (
            float(self.reference.expectation_bounds[name][place])
            + expectation_shift(self.norms[name], rounding, self._length)
            + self._length**2 * self._expectation_rounding[name]
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
