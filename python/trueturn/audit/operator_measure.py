"""The operator error of circuits: what a candidate is measured against when every start state counts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from trueturn import _memory
from trueturn.accuracy.difference import DENSE_QUBITS, DenseEvolution, PlannedEvolution, exact_evolution
from trueturn.accuracy.operator_norm import norm_of_difference
from trueturn.audit.base_candidate import BaseCandidate, circuits_from_start, gates_and_depth
from trueturn.audit.measure import Bench, Measured, judge
from trueturn.audit.result import PointError, Trial
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference.certificate import UNIT
from trueturn.rotations import Rotations

__all__ = ["CONFIDENCE", "OperatorBench"]

CONFIDENCE = 0.999
"""Probability, over the random start, with which each upper end from power iteration holds."""

_ITERATIONS = 24
_SEED = 0


@dataclass
class OperatorBench(Bench):
    """A bench for ``quantity="operator"``: ‖S - exp(-iHt)‖ in the spectral norm, see `trueturn.operator_error`.

    By whole matrices up to 10 qubits, else by power iteration. `start` only serves the reference, whose certificate
    holds for every start; `observables` are empty.
    """

    operator: Operator
    _exact: Sequence[DenseEvolution | PlannedEvolution] = field(init=False)

    def __post_init__(self) -> None:
        self.unit, self.norms = UNIT, {}
        dense = self.operator.qubits <= DENSE_QUBITS
        if dense:
            _memory.require((6 + len(self.times)) * 16 << 2 * self.operator.qubits, "audit")
        self._exact = [exact_evolution(self.operator, time, dense=dense, threads=self.threads) for time in self.times]

    def measure(self, candidate: BaseCandidate, partition: Partition | None, steps: int) -> Measured:
        """Compare a candidate's circuits with the exact evolution at every time."""
        legs = self.legs(candidate, partition, steps)
        roundings = max(leg.angle_roundings for leg in legs)
        circuits = [circuit for circuit in circuits_from_start(legs) if circuit is not None]
        points = tuple(
            PointError(time, "operator", float("nan"), float("nan"), self._error(circuit, exact, roundings))
            for time, circuit, exact in zip(self.times, circuits, self._exact, strict=True)
        )
        error = (max(point.error[0] for point in points), max(point.error[1] for point in points))
        gates, _ = gates_and_depth(circuits[-1])
        trial = Trial(steps, error, judge(error, self.tolerance), gates)
        return Measured(trial, points, circuits[-1].rounding_bound(roundings), circuits[-1])

    def _error(
        self, circuit: Rotations, exact: DenseEvolution | PlannedEvolution, roundings: int
    ) -> tuple[float, float]:
        low, high = norm_of_difference(
            circuit,
            exact,
            confidence=CONFIDENCE,
            iterations=_ITERATIONS,
            seed=_SEED,
            angle_roundings=roundings,
            threads=self.threads,
        )
        return low, min(high, 2.0)
