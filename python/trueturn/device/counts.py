"""Gates in the causal cone of an observable, for any number of steps of a formula."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from trueturn.audit.candidate import Candidate
from trueturn.device.causal_cone import causal_cone
from trueturn.device.shares import synthesised
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["Count", "Counts"]


@dataclass(frozen=True)
class Count:
    """Two-qubit gates, rotations to synthesise, and rotations that are T gates."""

    gates: int
    general: int
    tees: int

    def plus(self, other: Count, times: int) -> Count:
        """Add another count some times over."""
        return Count(
            self.gates + times * other.gates, self.general + times * other.general, self.tees + times * other.tees
        )


class Counts:
    """What of a candidate's circuit of r steps lies in the cone, remembered and extended.

    One more step adds one more run of the repeated block at the start of the circuit, where the cone no longer grows once
    a run of that block changed nothing. So from a step count at which a stretch of equal runs is left, counts go up by that of
    the block.
    """

    def __init__(
        self,
        candidate: Candidate,
        partition: Partition,
        time: float,
        observable: Operator,
        gates: Callable[[Rotations], int],
    ) -> None:
        self._candidate, self._partition, self._time = candidate, partition, time
        self._observable, self._gates = observable, gates
        self._known: dict[int, Count] = {}
        self._settled: tuple[int, Count, Count] | None = None

    def __call__(self, steps: int) -> Count:
        if self._settled is not None and steps >= self._settled[0]:
            from_steps, base, each = self._settled
            return base.plus(each, steps - from_steps)
        if steps not in self._known:
            circuit = self._candidate.formula.rotations(self._partition, self._time, steps)
            kept = causal_cone(circuit, self._observable, by="support").rotations
            self._known[steps] = self._counted(kept)
            repeated = [body for body, repeat in kept.blocks if repeat > 1]
            if repeated:
                self._settled = (steps, self._known[steps], self._counted(repeated[0]))
        return self._known[steps]

    def _counted(self, circuit: Rotations) -> Count:
        return Count(self._gates(circuit), *synthesised(circuit))
