"""Formulas whose order of parts is drawn anew in each step: any permutation, or forward or backward."""

from __future__ import annotations

import math
from abc import abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from trueturn.formulas import Formula
from trueturn.formulas.merging import Run, merged_runs
from trueturn.formulas.structure import require_nothing
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.randomised.channel import CHILDS, ChannelBound, clipped, random_direction_bound
from trueturn.randomised.checks import checked_formula, checked_partition, finite, refuse_long_time, require_size, whole
from trueturn.randomised.columns import Columns, PartWriter, append_run
from trueturn.randomised.ensemble import Ensemble
from trueturn.randomised.split import operator_norm, order_free_error
from trueturn.rotations import Rotations

__all__ = ["Directed", "Permuted", "directed", "permuted"]


@dataclass(frozen=True)
class _Ordered(Ensemble):
    """Equal steps of one formula, each with an order of its own."""

    formula: Formula
    partition: Partition
    total_time: float
    steps: int
    seed: int

    @property
    def qubits(self) -> int:
        """Number of qubits."""
        return self.partition.qubits

    @property
    def operator(self) -> Operator:
        """The partitioned operator."""
        return self.partition.operator()

    @property
    def time(self) -> float:
        """Total time."""
        return self.total_time

    def channel_bound(self) -> ChannelBound:
        """Bound the distance of the averaged channel from exp(-iHt).

        First order (lie): the theorem of Childs, Ostrander and Su, see `random_direction_bound`, in which
        averaging gains an order. Other formulas: twice the bound on the spectral norm for any order of parts, see
        `trueturn.randomised.split.order_free_error`.
        """
        norms = [operator_norm(part) for part in self.partition.parts]
        plain = len(self.formula.stages) == 1
        general = order_free_error(self.formula, math.fsum(norms) * abs(self.total_time), self.steps)
        if plain:
            return random_direction_bound(len(norms), max(norms, default=0.0), self.total_time, self.steps)
        theorem = f"order {self.formula.order}, any order of parts, 2 x^(p+1)/(p+1)! exp(x) for each step, doubled"
        return clipped(general, theorem, f"derived in trueturn.randomised.split; setting of {CHILDS}")

    @abstractmethod
    def _orders(self, generator: np.random.Generator) -> Sequence[Sequence[int]]: ...

    def _draw(self, generator: np.random.Generator) -> Rotations:
        step = merged_runs(self.formula.exact_stages(), len(self.partition.parts))
        runs: list[Run] = []
        for order in self._orders(generator):
            for part, weight in step:
                append_run(runs, order[part], weight)
        writer = PartWriter(self.partition, Fraction(self.total_time) / self.steps)
        columns = Columns()
        for part, weight in runs:
            writer.write(columns, part, weight)
        return columns.rotations(self.qubits, 0.0 - self.partition.identity * self.total_time, self.total_time)


class Permuted(_Ordered):
    """Equal steps, the order of the parts drawn uniformly from all permutations in each; see `permuted`."""

    def _orders(self, generator: np.random.Generator) -> Sequence[Sequence[int]]:
        draws = generator.random((self.steps, len(self.partition.parts)))
        orders: list[list[int]] = np.argsort(draws, axis=1, kind="stable").tolist()
        return orders


class Directed(_Ordered):
    """Equal steps, forward or backward with probability 1/2 each; see `directed`."""

    def _orders(self, generator: np.random.Generator) -> Sequence[Sequence[int]]:
        forward = range(len(self.partition.parts))
        choices = (forward, forward[::-1])
        return [choices[backward] for backward in (generator.random(self.steps) < 0.5).tolist()]


def permuted(formula: Formula | str, partition: Partition, time: float, steps: int, seed: int) -> Permuted:
    """Draw the order of the parts anew in each step, uniformly from all permutations.

    Parameters
    ----------
    formula : Formula or str
        Applied to the permuted parts in each step.
    partition : Partition
    time : float
        Total time, in inverse units of the coefficients; may be negative.
    steps : int
        At least 1.
    seed : int
        At least 0.

    Returns
    -------
    Permuted
        An `Ensemble`. Angles carry `ANGLE_ROUNDINGS` roundings; neighbouring runs of one part merge, across steps
        too.

    Raises
    ------
    FormulaError
        The name of no formula, or one that requires a structure of its parts.
    ArgumentError
        `partition` is no Partition, `time` not finite, `steps` or `seed` no whole number in range, or a sample would
        have more than 10**7 rotations.

    Notes
    -----
    Time and memory of a sample grow with steps × stages × terms: nothing repeats.

    References
    ----------
    .. [1] A. M. Childs, A. Ostrander, Y. Su, Faster quantum simulation by randomization, Quantum 3, 182 (2019),
       section on random permutations; from memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn import randomised
    >>> partition = tt.Partition.of(tt.Operator("X_0 + Y_0 + Z_0"), "single")
    >>> orders = randomised.permuted("lie", partition, time=1.0, steps=10, seed=7)
    >>> orders.sample(3) == orders.sample(3), orders.sample(3) == orders.sample(4)
    (True, False)
    """
    return Permuted(*_checked(formula, partition, time, steps, seed))


def directed(formula: Formula | str, partition: Partition, time: float, steps: int, seed: int) -> Directed:
    """Run each step forward or with the parts in reverse order, with probability 1/2 each.

    Parameters
    ----------
    formula : Formula or str
    partition : Partition
    time : float
        Total time, in inverse units of the coefficients; may be negative.
    steps : int
        At least 1.
    seed : int
        At least 0.

    Returns
    -------
    Directed
        An `Ensemble`; angles and merging as for `permuted`.

    Raises
    ------
    FormulaError, ArgumentError
        As for `permuted`.

    References
    ----------
    .. [1] A. M. Childs, A. Ostrander, Y. Su, Faster quantum simulation by randomization, Quantum 3, 182 (2019),
       theorem on the first-order formula; from memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn import randomised
    >>> partition = tt.Partition.of(tt.Operator("0.5 X_0 + 0.3 Y_0 + 0.2 Z_0"), "single")
    >>> print(randomised.directed("lie", partition, time=1.0, steps=20, seed=0).channel_bound())
    averaged channel (not one sample): half diamond norm ≤ 0.0034, diamond norm ≤ 0.0068 (randomised first order, \
x⁴/r³ exp(2x/r) + 2x³/(3r²) exp(x/r))
    """
    return Directed(*_checked(formula, partition, time, steps, seed))


def _checked(
    formula: Formula | str, partition: Partition, time: float, steps: int, seed: int
) -> tuple[Formula, Partition, float, int, int]:
    rule, parts = checked_formula(formula), checked_partition(partition)
    require_nothing(rule, "parts whose order is drawn do not keep that")
    length = finite("time", time, "give a real number, negative to run backwards")
    count = whole("steps", steps, 1, "give a number of equal steps, such as 10")
    number = whole("seed", seed, 0, "give an integer of at least 0")
    if not math.isfinite(parts.identity * length):
        raise refuse_long_time(length)
    require_size("steps", count, count * len(rule.stages) * sum(map(len, parts.parts)))
    return rule, parts, length, count, number
