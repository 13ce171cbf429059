"""The problem that a formula is tuned for: a small instance to tune on, a larger one to check on."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np

from trueturn.errors import ArgumentError
from trueturn.formulas.base import Formula
from trueturn.formulas.merging import rotations_of
from trueturn.formulas.structure import require_structure
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference import Reference, reference
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["MOST_QUBITS", "Instance", "Target"]

MOST_QUBITS = 12
"""Without a start the state vector has 2**(2 qubits) amplitudes; twelve qubits take 256 MiB."""

REFERENCE_TOLERANCE = 1e-11


@dataclass(frozen=True)
class Instance:
    """A partition and what is asked of it.

    Parameters
    ----------
    partition : Partition
    time : float
        Total time, in inverse units of the coefficients; not 0.
    steps : int
        Number of equal steps in which the formula covers that time, at least 1.
    observable : Operator, optional
    start : str, sequence or State, optional
        A product state as for `State.product`, or a state. Needed with an observable.

    Raises
    ------
    ArgumentError
        Wrong types, a time that is 0 or not finite, fewer steps than 1, qubits that differ, an observable without
        a start, or more than 12 qubits without a start.

    Notes
    -----
    With an observable the error is the root mean square of ⟨O⟩ - ⟨O⟩_exact over the ends of all steps, so that one
    lucky crossing cannot win. With a start alone it is the 2-norm of the state error at the end, phase kept. With
    neither it is the root mean square of that over all inputs, ‖S - U‖_F / 2^{n/2}, found exactly by evolving one
    half of n maximally entangled pairs. The exact evolution is a reference certified to 1e-11.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.formulas.search_target import Instance
    >>> chain = tt.model.ising(tt.lattice.chain(3), zz=-1.0, x=0.7)
    >>> round(Instance(tt.Partition.of(chain, "axis"), time=1.0, steps=4).error(tt.formula("strang")), 4)
    0.0215
    """

    partition: Partition
    time: float
    steps: int
    observable: Operator | None = None
    start: object = None
    _start: State = field(init=False, repr=False, compare=False)
    _exact: Reference = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        if not isinstance(self.partition, Partition):
            raise _wrong(
                "partition", "is not a Partition", self.partition, "make one with Partition.of(operator, rule)"
            )
        if isinstance(self.time, bool) or not isinstance(self.time, (int, float)) or not math.isfinite(self.time):
            raise _wrong("time", "is not a finite number", self.time, "give a real number other than 0")
        if self.time == 0:
            raise _wrong("time", "leaves nothing to simulate", self.time, "give a real number other than 0")
        if isinstance(self.steps, bool) or not isinstance(self.steps, int) or self.steps < 1:
            raise _wrong("steps", "is not a positive whole number", self.steps, "give 1 or more")
        if self.observable is not None:
            if not isinstance(self.observable, Operator):
                raise _wrong("observable", "is not an Operator", self.observable, "use trueturn.Operator, or leave out")
            if self.observable.qubits != self.partition.qubits:
                raise _wrong(
                    "observable",
                    f"does not act on the {self.partition.qubits} qubits of the partition",
                    self.observable.qubits,
                    f"build it with qubits={self.partition.qubits}",
                )
            if self.start is None:
                raise _wrong("start", "is missing", None, "an observable is measured in a state: give its start")
        qubits = self.partition.qubits
        if self.start is None and qubits > MOST_QUBITS:
            raise _wrong("partition", "is too large without a start", qubits, f"give a start, or {MOST_QUBITS} qubits")
        object.__setattr__(self, "_start", _paired(qubits) if self.start is None else _state(self.start, qubits))
        object.__setattr__(self, "_exact", self._reference())

    @property
    def width(self) -> int:
        """Qubits of the state that is evolved: twice those of the partition without a start."""
        return self._start.qubits

    def error(self, formula: object) -> float:
        """Measure the error of a formula, or of anything with `rotations` and `exact_stages`, on this instance.

        Raises
        ------
        FormulaError
            The partition lacks the structure that the formula requires.
        """
        if isinstance(formula, Formula):
            require_structure(formula, self.partition)
        return self.stages_error(formula.exact_stages())  # type: ignore[attr-defined]

    def stages_error(self, stages: Sequence[tuple[Fraction, bool]]) -> float:
        """Measure the error of a list of stages (weight, whether reverse); the order is not checked."""
        state = self._start.copy()
        if self.observable is None:
            state.apply(self._wide(rotations_of(stages, self.partition, self.time, self.steps)))
            return state.distance(self._exact.states[-1])
        circuit = rotations_of(stages, self.partition, self.time / self.steps, 1)
        squares = 0.0
        for exact in self._exact.expectations["observable"]:
            state.apply(circuit)
            squares += (state.expectation(self.observable) - float(exact)) ** 2
        return math.sqrt(squares / self.steps)

    def _wide(self, circuit: Rotations) -> Rotations:
        wide = Rotations([], [], [], self.width, phase=circuit.phase)
        for body, repeat in circuit.blocks:
            wide = wide + Rotations(body.x_masks, body.z_masks, body.angles, self.width).times(repeat)
        return wide

    def _reference(self) -> Reference:
        operator = self.partition.operator()
        wide = Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients, self.width)
        if self.observable is None:
            return reference(wide, self._start, [self.time], REFERENCE_TOLERANCE)
        times = [self.time * step / self.steps for step in range(1, self.steps + 1)]
        return reference(wide, self._start, times, REFERENCE_TOLERANCE, {"observable": self.observable})


@dataclass(frozen=True)
class Target:
    """What `Formula.search` tunes free parameters for.

    Parameters
    ----------
    small : Instance
        The free parameters make the error here least.
    large : Instance
        On more qubits than `small`. The tuned formula is kept only if it beats the untuned one here too.

    Raises
    ------
    ArgumentError
        Not two instances, or `large` is no larger than `small`.
    """

    small: Instance
    large: Instance

    def __post_init__(self) -> None:
        for name, value in (("small", self.small), ("large", self.large)):
            if not isinstance(value, Instance):
                raise _wrong(name, "is not an Instance", value, "give Instance(partition, time, steps)")
        if self.large.partition.qubits <= self.small.partition.qubits:
            raise _wrong(
                "large",
                f"is no larger than small, which has {self.small.partition.qubits} qubits",
                self.large.partition.qubits,
                "validate on more qubits",
            )


def _paired(qubits: int) -> State:
    """Σ_k |k⟩|k⟩ / 2^{n/2}: evolving the lower half turns operator norms into vector norms."""
    amplitudes = np.zeros((2**qubits, 2**qubits), dtype=np.complex128)
    np.fill_diagonal(amplitudes, 2 ** (-qubits / 2))
    return State.from_array(amplitudes.reshape(-1))


def _state(start: object, qubits: int) -> State:
    state = start.copy() if isinstance(start, State) else State.product(start)  # type: ignore[arg-type]
    if state.qubits != qubits:
        raise _wrong("start", f"is not a state of {qubits} qubits", state.qubits, "give one site for each qubit")
    return state


def _wrong(argument: str, problem: str, value: object, remedy: str) -> ArgumentError:
    return ArgumentError(f"{argument}: {problem} ({value!r}); {remedy}", argument=argument, value=value)
