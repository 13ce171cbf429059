"""A candidate circuit: a formula, a rule that makes parts, and a number of steps; or a circuit as it is."""

from __future__ import annotations

from dataclasses import dataclass
from numbers import Integral

from trueturn.errors import ArgumentError
from trueturn.formulas import Formula, formula
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["Candidate", "GivenCircuit"]


@dataclass(frozen=True)
class GivenCircuit:
    """A circuit that was made elsewhere, in the place of a formula: the same for every partition.

    `order` is 0: nothing is claimed.
    """

    name: str
    circuit: Rotations
    order: int = 0

    def rotations(self, partition: Partition, time: float, steps: int) -> Rotations:
        """Return the circuit."""
        return self.circuit


@dataclass(frozen=True)
class Candidate:
    """One circuit to be judged.

    Parameters
    ----------
    formula : str, Formula, Processed or GivenCircuit
        A registered name (`trueturn.formulas()`), a formula of the user's own, or a processed one
        (`trueturn.formulas.processed`), whose processor acts at the start and at every readout.
    rule : str or Partition
        How the Hamiltonian is split into parts: a rule of `Partition.of`, or a ready partition.
    steps : int or "least"
        Step count, or ``"least"`` to search for the smallest that meets the tolerance.

    Raises
    ------
    FormulaError
        The name is not registered.
    ArgumentError
        `steps` is neither a positive whole number nor ``"least"``.

    Examples
    --------
    >>> Candidate("strang", rule="bond", steps=40).label
    'strang, bond'
    """

    formula: Formula | Processed | GivenCircuit
    rule: str | Partition = "commuting"
    steps: int | str = "least"

    def __post_init__(self) -> None:
        if isinstance(self.formula, str):
            object.__setattr__(self, "formula", formula(self.formula))
        if not isinstance(self.formula, (Formula, Processed, GivenCircuit)):
            raise ArgumentError(
                f"formula: neither a name nor a Formula nor a Processed ({self.formula!r}); see trueturn.formulas()",
                argument="formula",
                value=self.formula,
            )
        if isinstance(self.steps, Integral) and not isinstance(self.steps, bool):
            object.__setattr__(self, "steps", int(self.steps))
        whole = isinstance(self.steps, int) and not isinstance(self.steps, bool)
        if isinstance(self.formula, GivenCircuit) and self.steps != 1:
            raise ArgumentError(
                f"steps: a circuit is run as it is ({self.steps!r} steps); leave steps at 1",
                argument="steps",
                value=self.steps,
            )
        if self.steps != "least" and not (whole and int(self.steps) >= 1):
            raise ArgumentError(
                f'steps: not a positive whole number ({self.steps!r}); give 1 or more, or "least"',
                argument="steps",
                value=self.steps,
            )

    @classmethod
    def of_circuit(cls, circuit: Rotations, name: str = "circuit") -> Candidate:
        """Return a candidate that is one circuit, such as one that `trueturn.read_qasm` read.

        It is run as it is, once, so it is judged at one time: that of an audit with a single time.

        Raises
        ------
        ArgumentError
            `circuit` is no Rotations.

        Examples
        --------
        >>> Candidate.of_circuit(Rotations([1], [0], [0.25], qubits=2), "device.qasm").label
        'device.qasm, as read'
        """
        if not isinstance(circuit, Rotations):
            raise ArgumentError(
                f"circuit: no Rotations ({circuit!r}); make one by trueturn.read_qasm",
                argument="circuit",
                value=circuit,
            )
        return cls(GivenCircuit(name, circuit), rule="single", steps=1)

    @property
    def label(self) -> str:
        """Formula and rule, for tables."""
        if isinstance(self.formula, GivenCircuit):
            return f"{self.formula.name}, as read"
        rule = self.rule if isinstance(self.rule, str) else "own parts"
        return f"{self.formula.name}, {rule}"

    def partition(self, operator: Operator) -> Partition:
        """Split the operator by this candidate's rule, or check that its own parts sum to it."""
        if isinstance(self.rule, Partition):
            self.rule.require_sum(operator)
            return self.rule
        return Partition.of(operator, self.rule)
