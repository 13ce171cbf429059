"""A candidate circuit: a formula, a rule that makes parts, and a number of steps."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from numbers import Integral
from typing import TYPE_CHECKING

from trueturn.audit.base_candidate import SEGMENT_ROUNDINGS, BaseCandidate, CircuitLeg, Leg
from trueturn.errors import ArgumentError
from trueturn.formulas import Formula, formula
from trueturn.formulas.processed import Processed
from trueturn.operator import Operator
from trueturn.partition import Partition

if TYPE_CHECKING:
    from trueturn.audit.given_circuit import GivenCircuit
    from trueturn.audit.implementation import Apply, Implementation
    from trueturn.rotations import Rotations

__all__ = ["Candidate", "checked_steps"]


@dataclass(frozen=True)
class Candidate(BaseCandidate):
    """One circuit to be judged.

    Parameters
    ----------
    formula : str, Formula or Processed
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

    Notes
    -----
    Circuits that no formula made are candidates too: see `from_rotations` and `from_callable`.

    Examples
    --------
    >>> Candidate("strang", rule="bond", steps=40).label
    'strang, bond'
    """

    formula: Formula | Processed
    rule: str | Partition = "commuting"
    steps: int | str = "least"

    def __post_init__(self) -> None:
        if isinstance(self.formula, str):
            object.__setattr__(self, "formula", formula(self.formula))
        if not isinstance(self.formula, (Formula, Processed)):
            raise ArgumentError(
                f"formula: neither a name nor a Formula nor a Processed ({self.formula!r}); see trueturn.formulas()",
                argument="formula",
                value=self.formula,
            )
        object.__setattr__(self, "steps", checked_steps(self.steps))

    @staticmethod
    def from_rotations(name: str, circuit: Rotations | Mapping[float, Rotations]) -> GivenCircuit:
        """Make a candidate of a circuit as it is, such as one read from a file.

        Parameters
        ----------
        name : str
            For tables.
        circuit : Rotations or mapping of float to Rotations
            The circuit to the one time that is asked for; or one circuit for each time, each from the start.
            One that `read_qasm` read, unchanged, is shown with the gates of its file (`Rotations.gate_counts`).

        Returns
        -------
        GivenCircuit
            Its step count is 1 and cannot be searched.

        Raises
        ------
        ArgumentError
            The name is empty, or the circuit is neither of these.

        Examples
        --------
        >>> import trueturn as tt
        >>> turn = tt.Rotations([1], [0], [0.6], qubits=1)
        >>> ours = tt.Candidate.from_rotations("from the lab", turn)
        >>> field, start, seen = tt.Operator("0.6 X_0"), tt.State.product("0"), {"z": tt.Operator("Z_0")}
        >>> tt.audit(field, start, 1.0, [ours], 1e-6, observables=seen).verdict
        'meets'
        """
        from trueturn.audit.given_circuit import GivenCircuit

        return GivenCircuit(circuit, name)

    @staticmethod
    def from_callable(name: str, apply: Apply, steps: int | str = 1, *, order: int = 2) -> Implementation:
        """Make a candidate of a user's own implementation.

        Parameters
        ----------
        name : str
            For tables.
        apply : callable
            ``apply(state, time, steps)`` evolves by `time` in `steps` steps. `state` is an ndarray of 2**n amplitudes,
            a copy that it may overwrite; it returns the evolved amplitudes, shape (2**n,), or the unitary matrix, shape
            (2**n, 2**n): an ndarray or anything with DLPack or the array interface. Bit q of an index is qubit q.
        steps : int or "least"
        order : int
            Expected power by which the error falls with the step length; only guides the search for ``"least"``.

        Returns
        -------
        Implementation
            What it costs is not known, and is shown so.

        Raises
        ------
        ArgumentError
            The name is empty, `apply` cannot be called with three arguments, or `steps` or `order` is no positive whole number.

        Examples
        --------
        >>> import numpy as np, trueturn as tt
        >>> def turn(state, time, steps):
        ...     c, s = np.cos(0.6 * time), -1j * np.sin(0.6 * time)
        ...     return np.array([[c, s], [s, c]])
        >>> mine = tt.Candidate.from_callable("mine", turn)
        >>> field, start, seen = tt.Operator("0.6 X_0"), tt.State.product("0"), {"z": tt.Operator("Z_0")}
        >>> (row,) = tt.audit(field, start, 1.0, [mine], 1e-6, observables=seen).rows
        >>> row.verdict, row.two_qubit_gates
        ('meets', None)
        """
        from trueturn.audit.implementation import Implementation

        return Implementation(apply, name, checked_steps(steps), order)

    @property
    def name(self) -> str:
        """Name of the formula."""
        return self.formula.name

    @property
    def order(self) -> int:
        """Order of the formula."""
        return self.formula.order

    @property
    def rule_words(self) -> str:
        """The rule, or that the parts are the user's own."""
        return self.rule if isinstance(self.rule, str) else "own parts"

    def partition(self, operator: Operator) -> Partition:
        """Split the operator by this candidate's rule, or check that its own parts sum to it."""
        if isinstance(self.rule, Partition):
            self.rule.require_sum(operator)
            return self.rule
        return Partition.of(operator, self.rule)

    def prepare(self, operator: Operator, times: Sequence[float]) -> Partition:
        """Return the parts of the operator; any times will do."""
        return self.partition(operator)

    def legs(
        self, partition: Partition | None, times: Sequence[float], counts: Sequence[int], along: bool
    ) -> list[Leg]:
        """Return one leg for each time; see `BaseCandidate.legs`."""
        assert partition is not None
        before = zip([0.0, *times[:-1]], [0, *counts[:-1]], strict=True) if along else [(0.0, 0)] * len(times)
        return [
            CircuitLeg(self.formula.rotations(partition, time - was, count - done), not along, SEGMENT_ROUNDINGS)
            for time, count, (was, done) in zip(times, counts, before, strict=True)
        ]


def checked_steps(steps: object) -> int | str:
    """Return a positive whole number or ``"least"``.

    Raises
    ------
    ArgumentError
        It is neither.
    """
    if isinstance(steps, str) and steps == "least":
        return "least"
    if isinstance(steps, Integral) and not isinstance(steps, bool) and int(steps) >= 1:
        return int(steps)
    raise ArgumentError(
        f'steps: not a positive whole number ({steps!r}); give 1 or more, or "least"', argument="steps", value=steps
    )
