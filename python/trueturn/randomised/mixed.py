"""Partially randomised formulas: large terms by a product formula, the tail of small ones drawn."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np

from trueturn.errors import OperatorError
from trueturn.formulas import Formula
from trueturn.formulas.merging import Run, merged_runs, repeated
from trueturn.formulas.structure import require_nothing
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.randomised.channel import CAMPBELL, ChannelBound, clipped, qdrift_diamond
from trueturn.randomised.checks import (
    checked_formula,
    checked_operator,
    checked_partition,
    finite,
    refuse_long_time,
    require_size,
    whole,
)
from trueturn.randomised.columns import Columns, PartWriter
from trueturn.randomised.drift import TermSampler
from trueturn.randomised.ensemble import Ensemble
from trueturn.randomised.split import split_error
from trueturn.rotations import Rotations

__all__ = ["Partly", "divided", "partly"]


@dataclass(frozen=True)
class Partly(Ensemble):
    """A product formula in which the last part, the tail, is drawn by qDRIFT; see `partly`."""

    formula: Formula
    partition: Partition
    tail: Operator
    total_time: float
    steps: int
    draws: int
    seed: int
    _blocks: list[tuple[list[Run], int]] = field(init=False, repr=False, compare=False)
    _sampler: TermSampler = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        runs = merged_runs(self.formula.exact_stages(), self._tail_place + 1)
        object.__setattr__(self, "_blocks", repeated(runs, self.steps))
        object.__setattr__(self, "_sampler", TermSampler(self.tail, None))

    @property
    def _tail_place(self) -> int:
        """Number of the tail among the parts.

        Without large terms an empty part stands before it, so that the tail's runs do not merge over all steps into
        a single place.
        """
        return max(1, len(self.partition.parts))

    @property
    def qubits(self) -> int:
        """Number of qubits."""
        return self.partition.qubits

    @property
    def operator(self) -> Operator:
        """The partitioned operator plus the tail."""
        return self.partition.operator() + self.tail

    @property
    def time(self) -> float:
        """Total time."""
        return self.total_time

    @property
    def places(self) -> int:
        """How often the tail is drawn in one circuit."""
        return sum(repeat for runs, repeat in self._blocks for part, _ in runs if part == self._tail_place)

    def channel_bound(self) -> ChannelBound:
        """Bound the distance of the averaged channel from exp(-iHt) by the triangle inequality.

        ‖E - U‖_⋄ ≤ 2 ‖S - U‖ + Σ twice the qDRIFT bound of the tail, over the places where it is drawn, S being the
        formula with the tail exact; see `trueturn.randomised.split.split_error`. No published constant is
        claimed.
        """
        parts = [*self.partition.parts, self.tail.without_identity()]
        norm = self.tail.without_identity().one_norm()
        step = abs(self.total_time) / self.steps
        drawn = [
            repeat * qdrift_diamond(norm * abs(float(weight)) * step, self.draws)
            for runs, repeat in self._blocks
            for part, weight in runs
            if part == self._tail_place
        ]
        split = split_error(self.formula, [part for part in parts if len(part)], self.total_time, self.steps)
        theorem = "triangle inequality: twice the error of the split with the tail exact, plus qDRIFT of the tail"
        return clipped(split + math.fsum(drawn) / 2.0, theorem, f"derived in trueturn.randomised.mixed; {CAMPBELL}")

    def _draw(self, generator: np.random.Generator) -> Rotations:
        step = Fraction(self.total_time) / self.steps
        writer = PartWriter(self.partition, step)
        columns = Columns()
        for runs, repeat in self._blocks:
            for _ in range(repeat):
                for part, weight in runs:
                    if part == self._tail_place:
                        self._sampler.write(columns, generator, weight * step, self.draws)
                    elif part < len(self.partition.parts):
                        writer.write(columns, part, weight)
        phase = 0.0 - (self.partition.identity + self.tail.identity_coefficient) * self.total_time
        return columns.rotations(self.qubits, phase, self.total_time)


def divided(operator: Operator, cutoff: float) -> tuple[Operator, Operator]:
    """Divide an operator into its large terms and its tail.

    Parameters
    ----------
    operator : Operator
    cutoff : float
        Terms with \\|c\\| of at least this are large; the identity always counts as large.

    Returns
    -------
    (Operator, Operator)
        Large terms and tail, on as many qubits as the operator; either may be empty.

    Raises
    ------
    OperatorError
        `operator` is no Operator.
    ArgumentError
        `cutoff` is not a finite number.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn import randomised
    >>> large, tail = randomised.divided(tt.Operator("Z_0 Z_1 + 0.9 X_0 + 0.01 Y_0"), 0.1)
    >>> print(large, "and", tail)
    1.0 Z_0 Z_1 + 0.9 X_0 and 0.01 Y_0
    """
    whole_operator = checked_operator("operator", operator)
    limit = finite("cutoff", cutoff, "give a size of coefficients")
    identity = (whole_operator.x_masks == 0) & (whole_operator.z_masks == 0)
    large = (np.abs(whole_operator.coefficients) >= limit) | identity.astype(bool)

    def those(kept: np.ndarray[tuple[int], np.dtype[np.bool_]]) -> Operator:
        return Operator.from_masks(
            whole_operator.x_masks[kept].tolist(),
            whole_operator.z_masks[kept].tolist(),
            whole_operator.coefficients[kept],
            whole_operator.qubits,
        )

    return those(large), those(~large)


def partly(
    formula: Formula | str, partition: Partition, tail: Operator, time: float, steps: int, draws: int, seed: int
) -> Partly:
    """Apply a product formula to large parts, and draw a tail of small terms by qDRIFT wherever its turn comes.

    Parameters
    ----------
    formula : Formula or str
    partition : Partition
        The large terms, see `divided`.
    tail : Operator
        Added as the last part; its terms need not commute.
    time : float
        Total time, in inverse units of the coefficients; may be negative.
    steps : int
        At least 1.
    draws : int
        Rotations drawn each time the tail's turn comes, at least 1. That is once a step for lie and strang, with
        large terms or without; see `Partly.places`.
    seed : int
        At least 0.

    Returns
    -------
    Partly
        An `Ensemble`.

    Raises
    ------
    FormulaError
        The name of no formula, or one that requires a structure of its parts.
    OperatorError
        `tail` is no Operator, or acts on other qubits than the partition.
    ArgumentError
        As for `permuted` and `qdrift`.

    References
    ----------
    .. [1] M. Hagan, N. Wiebe, Composite quantum simulations, Quantum 7, 1181 (2023), for the idea; its constants are
       not used.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn import randomised
    >>> large, tail = randomised.divided(tt.Operator("Z_0 Z_1 + 0.9 X_0 + 0.01 Y_0 + 0.02 X_1"), 0.1)
    >>> parts = tt.Partition.of(large, "commuting")
    >>> mixed = randomised.partly("strang", parts, tail, time=1.0, steps=10, draws=3, seed=5)
    >>> mixed.places
    10
    """
    rule, parts = checked_formula(formula), checked_partition(partition)
    require_nothing(rule, "a part that is drawn term by term does not keep that")
    small = checked_operator("tail", tail)
    if small.qubits != parts.qubits:
        raise OperatorError(
            f"tail: acts on {small.qubits} qubits and the partition on {parts.qubits}; "
            f"build it with qubits={parts.qubits}",
            argument="tail",
        )
    length = finite("time", time, "give a real number, negative to run backwards")
    count = whole("steps", steps, 1, "give a number of equal steps, such as 10")
    drawn = whole("draws", draws, 1, "give how many rotations to draw")
    number = whole("seed", seed, 0, "give an integer of at least 0")
    for size in (parts.identity + small.identity_coefficient, small.without_identity().one_norm()):
        if not math.isfinite(size * length):
            raise refuse_long_time(length)
    stages = count * len(rule.stages)
    require_size("draws", drawn, stages * drawn if len(small) else 0)
    require_size("steps", count, stages * (sum(map(len, parts.parts)) + (drawn if len(small) else 0)))
    return Partly(rule, parts, small, length, count, drawn, number)
