"""What an audit asks of any candidate, however its circuit came about."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Protocol

from trueturn.formulas import ANGLE_ROUNDINGS
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["SEGMENT_ROUNDINGS", "BaseCandidate", "CircuitLeg", "Leg", "circuits_from_start", "gates_and_depth"]

# A segment's time is a difference of two requested times: one more rounding in each angle of a formula.
SEGMENT_ROUNDINGS = ANGLE_ROUNDINGS + 1


class Leg(Protocol):
    """The way from one readout to the next: `fresh` says that it sets out from the start state, not from the last readout.

    `circuit` is None where only the effect is known.
    """

    @property
    def fresh(self) -> bool: ...

    @property
    def circuit(self) -> Rotations | None: ...

    @property
    def angle_roundings(self) -> int:
        """How many roundings went into each angle of the circuit."""

    def run(self, state: State, threads: int) -> None:
        """Evolve the state in place."""

    def rounding(self, unit: float) -> float:
        """Bound what our arithmetic adds to a unit vector in the 2-norm; 0 where the arithmetic itself is judged."""


@dataclass(frozen=True)
class CircuitLeg:
    """A leg that our engine runs; `angle_roundings` went into forming each angle."""

    circuit: Rotations
    fresh: bool
    angle_roundings: int = 0

    def run(self, state: State, threads: int) -> None:
        """Evolve the state in place."""
        state.apply(self.circuit, threads=threads)

    def rounding(self, unit: float) -> float:
        """Bound what the engine's arithmetic adds to a unit vector in the 2-norm."""
        return self.circuit.rounding_bound(self.angle_roundings, unit)


def circuits_from_start(legs: Iterable[Leg]) -> Iterator[Rotations | None]:
    """Yield for each readout the circuit that reaches it from the start, or None where it is not known."""
    whole: Rotations | None = None
    for place, leg in enumerate(legs):
        if leg.fresh or place == 0:
            whole = leg.circuit
        else:
            whole = None if whole is None or leg.circuit is None else whole + leg.circuit
        yield whole


def gates_and_depth(circuit: Rotations) -> tuple[int | None, int | None]:
    """Return the two-qubit gates and the depth in them.

    Those of the file that the circuit was read from, where it has no gates on more qubits; otherwise those that its
    rotations take, 2(w-1) each.
    """
    counts = circuit.gate_counts
    if counts is None:
        return circuit.two_qubit_gates(), circuit.depth()
    return (None, None) if counts.larger_gates else (counts.two_qubit_gates, counts.two_qubit_depth)


class BaseCandidate(ABC):
    """One circuit to be judged.

    Attributes
    ----------
    name : str
        Of the formula, the circuit or the implementation.
    rule_words : str
        How the Hamiltonian is split, in words; empty where the candidate does not split it.
    steps : int or "least"
    order : int
        Where to look next in a search for the least step count; no answer rests on it.
    """

    @property
    @abstractmethod
    def name(self) -> str: ...

    @property
    @abstractmethod
    def steps(self) -> int | str: ...

    @property
    @abstractmethod
    def order(self) -> int: ...

    @property
    def rule_words(self) -> str:
        """How the Hamiltonian is split; empty where it is not."""
        return ""

    @property
    def on_grid(self) -> bool:
        """Whether one circuit of equal steps can be read on the way."""
        return True

    @property
    def steps_words(self) -> str:
        """What was asked of the steps."""
        return "least" if self.steps == "least" else "given"

    @property
    def label(self) -> str:
        """Name and rule, for tables."""
        return f"{self.name}, {self.rule_words}" if self.rule_words else self.name

    @abstractmethod
    def prepare(self, operator: Operator, times: Sequence[float]) -> Partition | None:
        """Check that the candidate fits the Hamiltonian and the times; return its parts, if it has any."""

    @abstractmethod
    def legs(
        self, partition: Partition | None, times: Sequence[float], counts: Sequence[int], along: bool
    ) -> list[Leg]:
        """Return one leg for each time.

        Parameters
        ----------
        partition : Partition or None
            What `prepare` returned.
        times : sequence of float
            Ascending, positive.
        counts : sequence of int
            Steps from the start to each time.
        along : bool
            Whether one circuit is read on the way, or each time has a circuit of its own.
        """
