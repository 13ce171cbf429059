"""A candidate that is a circuit as it is: one that was read from a file or built by hand."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from numbers import Real

from trueturn.audit.base_candidate import BaseCandidate, CircuitLeg, Leg
from trueturn.audit.figures import plain
from trueturn.errors import ArgumentError, AuditError
from trueturn.operator import Operator
from trueturn.rotations import Rotations

__all__ = ["GivenCircuit", "checked_name"]

_SAME_TIME = 1e-12


@dataclass(frozen=True)
class GivenCircuit(BaseCandidate):
    """A circuit as it is; made by `Candidate.from_rotations`.

    Attributes
    ----------
    circuit : Rotations or mapping of float to Rotations
        To the one time asked for, or by time, each from the start.
    name : str
    steps : int
        1: the circuit runs once.
    """

    circuit: Rotations | Mapping[float, Rotations]
    name: str = ""

    def __post_init__(self) -> None:
        object.__setattr__(self, "name", checked_name(self.name))
        remedy = "give Rotations, or a mapping of times to Rotations"
        if isinstance(self.circuit, Rotations):
            return
        if not isinstance(self.circuit, Mapping) or not self.circuit:
            raise ArgumentError(
                f"circuit: no circuit ({self.circuit!r}); {remedy}", argument="circuit", value=self.circuit
            )
        for time, circuit in self.circuit.items():
            if not isinstance(circuit, Rotations) or isinstance(time, bool) or not isinstance(time, Real):
                raise ArgumentError(
                    f"circuit: no circuit at a time ({time!r}: {circuit!r}); {remedy}",
                    argument="circuit",
                    value=circuit,
                )
        object.__setattr__(self, "circuit", dict(self.circuit))

    @property
    def from_file(self) -> bool:
        """Whether circuits were read from files, whose gates then count."""
        circuits = [self.circuit] if isinstance(self.circuit, Rotations) else self.circuit.values()
        return any(circuit.gate_counts is not None for circuit in circuits)

    @property
    def steps(self) -> int:
        """1: the circuit runs once."""
        return 1

    @property
    def order(self) -> int:
        """1; a given circuit has no step length."""
        return 1

    @property
    def on_grid(self) -> bool:
        """No: it has no steps to read between."""
        return False

    @property
    def steps_words(self) -> str:
        """That the circuit is as given."""
        return "as given"

    def prepare(self, operator: Operator, times: Sequence[float]) -> None:
        """Check the number of qubits and that there is a circuit for each time.

        Raises
        ------
        AuditError
            Either does not fit.
        """
        for circuit in self._circuits(times):
            if circuit.qubits != operator.qubits:
                raise AuditError(
                    f"candidates: the circuit {self.name!r} acts on {circuit.qubits} qubits, the Hamiltonian on "
                    f"{operator.qubits}; read it on {operator.qubits} qubits",
                    reason="circuit on another number of qubits",
                    limit=operator.qubits,
                )

    def legs(self, partition: object, times: Sequence[float], counts: Sequence[int], along: bool) -> list[Leg]:
        """Return one leg for each time, each from the start."""
        return [CircuitLeg(circuit, fresh=True) for circuit in self._circuits(times)]

    def _circuits(self, times: Sequence[float]) -> list[Rotations]:
        if isinstance(self.circuit, Rotations):
            if len(times) > 1:
                shown = ", ".join(plain(time) for time in times)
                raise AuditError(
                    f"candidates: the circuit {self.name!r} reaches one time ({shown} asked); "
                    "ask for one time, or give a mapping of times to circuits",
                    reason="one circuit for several times",
                    limit=1,
                )
            return [self.circuit]
        return [self._circuit_at(time, self.circuit) for time in times]

    def _circuit_at(self, time: float, circuits: Mapping[float, Rotations]) -> Rotations:
        for known, circuit in circuits.items():
            if math.isclose(known, time, rel_tol=_SAME_TIME):
                return circuit
        shown = ", ".join(plain(float(known)) for known in circuits)
        raise AuditError(
            f"candidates: {self.name!r} has no circuit for time {plain(time)} (only for {shown}); "
            "give one for each requested time",
            reason="no circuit for a time",
            limit=None,
        )


def checked_name(name: object) -> str:
    """Return a name for tables.

    Raises
    ------
    ArgumentError
        It is no text, or empty.
    """
    if not isinstance(name, str) or not name.strip():
        raise ArgumentError(f"name: no text ({name!r}); give a name for tables", argument="name", value=name)
    return name
