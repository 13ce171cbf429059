"""Gates in the causal cone of an observable, for any number of steps of a formula."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

from trueturn.audit.candidate import Candidate
from trueturn.device.causal_cone import causal_cone
from trueturn.device.counting import Counting
from trueturn.device.shares import synthesised
from trueturn.export.cost import cost_of
from trueturn.export.hardware import Hardware
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["Count", "Counts", "Written"]

STRAIGHT_FROM = 4
"""Steps from which on the loop over whole steps is there with every formula, with its ends peeled off."""

MOST_GATES = 2**64 - 1


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
        how: Counting,
    ) -> None:
        self._candidate, self._partition, self._time = candidate, partition, time
        self._observable, self.how = observable, how
        self._written = None if how.hardware is None else Written(self._circuit, how.hardware)
        self._known: dict[int, Count] = {}
        self._settled: tuple[int, Count, Count] | None = None

    def __call__(self, steps: int) -> Count:
        """Count what can reach the observable with some steps, by `how`."""
        kept = self._kept(steps)
        if self._written is None:
            return kept
        total = self._written(steps)
        return replace(kept, gates=total if self.how.routed else min(total, kept.gates))

    def _circuit(self, steps: int) -> Rotations:
        return self._candidate.formula.rotations(self._partition, self._time, steps)

    def _kept(self, steps: int) -> Count:
        """Count the rotations of the cone, as they are given."""
        if self._settled is not None and steps >= self._settled[0]:
            from_steps, base, each = self._settled
            return base.plus(each, steps - from_steps)
        if steps not in self._known:
            kept = causal_cone(self._circuit(steps), self._observable, by="support").rotations
            self._known[steps] = self._counted(kept)
            repeated = [body for body, repeat in kept.blocks if repeat > 1]
            if repeated:
                self._settled = (steps, self._known[steps], self._counted(repeated[0]))
        return self._known[steps]

    def _counted(self, circuit: Rotations) -> Count:
        return Count(self.how.of(circuit), *synthesised(circuit))


class Written:
    """Two-qubit gates of a candidate's circuit of r steps as it is written for a device; from some r on a straight line.

    Steps are written as a loop: each further run of its body adds the same gates. So is every choice of routing and layout, of
    which the least is taken; a least of straight lines bends down only, and lies nowhere above the line through two of
    its points, beyond them. So the line never counts too few.
    """

    def __init__(self, circuit: Callable[[int], Rotations], hardware: Hardware) -> None:
        self._circuit, self._hardware = circuit, hardware
        self._known: dict[int, int] = {}

    def __call__(self, steps: int) -> int:
        if steps <= STRAIGHT_FROM + 1:
            return self._exact(steps)
        first, second = self._exact(STRAIGHT_FROM), self._exact(STRAIGHT_FROM + 1)
        return min(second + (steps - STRAIGHT_FROM - 1) * (second - first), MOST_GATES)

    def _exact(self, steps: int) -> int:
        if steps not in self._known:
            self._known[steps] = cost_of(self._circuit(steps), self._hardware).two_qubit_gates
        return self._known[steps]
