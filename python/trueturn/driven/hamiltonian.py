"""Hamiltonians whose strengths depend on time."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from typing import final

import numpy as np

from trueturn.driven import checks
from trueturn.driven.circuits import Clock, equal_steps
from trueturn.driven.parts import DrivenPart, driven_parts
from trueturn.driven.strengths import Constant, Strength, as_strength, value_of
from trueturn.errors import OperatorError
from trueturn.formulas import Formula
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.rotations import Rotations

__all__ = ["Driven"]


@final
class Driven:
    """A Hamiltonian H(t) = Σ_k f_k(t) H_k with strengths that depend on time; immutable.

    Parameters
    ----------
    terms : iterable of (strength, Operator)
        A strength is a number, a function of time, or one of the classes of `trueturn.driven`: `Constant`, `Ramp`,
        `Sinusoid`, `Samples`, `Call` (a function with a domain). At least one term.

    Attributes
    ----------
    terms : tuple of (Strength, Operator)
        The operators on one number of qubits, the largest given.
    qubits : int
    domain : (float, float)
        Where all strengths are defined; ends may be infinite.
    kinks : tuple of float
        Times at which some strength is not smooth, ascending.

    Raises
    ------
    OperatorError
        Not pairs of a strength and an Operator, or no terms.
    ArgumentError
        Something that is no strength, or domains without a common time.

    Notes
    -----
    ħ = 1; time is in inverse units of f_k times the coefficients. Functions are trusted to return the same number for
    the same time.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.driven import Driven, Ramp
    >>> h = Driven([(Ramp(0.0, rate=0.5), tt.Operator("Z_0 Z_1")), (1.0, tt.Operator("X_0 + X_1"))])
    >>> print(h.at(2.0))
    1.0 Z_0 Z_1 + 1.0 X_0 + 1.0 X_1
    >>> h.rotations(tt.formula("strang"), "terms", time=2.0, steps=10).count
    31
    """

    __slots__ = ("_domain", "_qubits", "_terms")

    def __init__(self, terms: Iterable[tuple[float | Callable[[float], float] | Strength, Operator]]) -> None:
        remedy = "give pairs (strength, Operator)"
        if isinstance(terms, str) or not isinstance(terms, Iterable):
            raise OperatorError(f"terms: is no sequence ({terms!r}); {remedy}", argument="terms")
        pairs: list[tuple[Strength, Operator]] = []
        for place, entry in enumerate(terms):
            if not isinstance(entry, tuple) or len(entry) != 2 or not isinstance(entry[1], Operator):
                raise OperatorError(f"terms[{place}]: is no pair ({entry!r}); {remedy}", argument="terms")
            pairs.append((as_strength(entry[0], f"terms[{place}]"), entry[1]))
        if not pairs:
            raise OperatorError(f"terms: is empty; {remedy}", argument="terms")
        self._qubits = max(operator.qubits for _, operator in pairs)
        self._terms = tuple((strength, _widened(operator, self._qubits)) for strength, operator in pairs)
        low = max(strength.domain[0] for strength, _ in pairs)
        high = min(strength.domain[1] for strength, _ in pairs)
        if not low < high:
            checks.refuse("terms", "are never all defined", (low, high), "give strengths whose domains overlap")
        self._domain = low, high

    @property
    def terms(self) -> tuple[tuple[Strength, Operator], ...]:
        """The strengths and their operators, in the given order."""
        return self._terms

    @property
    def qubits(self) -> int:
        """Number of qubits acted on."""
        return self._qubits

    @property
    def domain(self) -> tuple[float, float]:
        """(low, high): the closed interval of times at which all strengths are defined."""
        return self._domain

    @property
    def kinks(self) -> tuple[float, ...]:
        """Times at which some strength is not smooth, ascending, each once."""
        return tuple(sorted({kink for strength, _ in self._terms for kink in strength.kinks}))

    @property
    def constant(self) -> bool:
        """Whether every strength is a `Constant`."""
        return all(isinstance(strength, Constant) for strength, _ in self._terms)

    def strengths(self, time: float) -> list[float]:
        """Return f_k(time) for each term.

        Raises
        ------
        ArgumentError
            A time outside of the domain, or a strength that is no finite real number there.
        """
        self.require_domain(time, time)
        return [value_of(strength, time) for strength, _ in self._terms]

    def at(self, time: float) -> Operator:
        """Return the Hamiltonian frozen at one time.

        Parameters
        ----------
        time : float

        Returns
        -------
        Operator
            Strings whose coefficient is exactly zero at that time are left out.

        Raises
        ------
        ArgumentError
            As for `strengths`.
        """
        values = self.strengths(checks.number("time", time))
        total = Operator("0", qubits=self._qubits)
        for value, (_, operator) in zip(values, self._terms, strict=True):
            total = total + value * operator
        return total

    def strings(self) -> Operator:
        """Return every string that some term has, with Σ_k |its coefficient in H_k|.

        Partition it to say which strings share a part: ``Partition.of(driven.strings(), rule)``.
        """
        total = Operator("0", qubits=self._qubits)
        for _, operator in self._terms:
            total = total + Operator.from_masks(
                operator.x_masks, operator.z_masks, np.abs(operator.coefficients), self._qubits
            )
        return total

    def require_domain(self, low: float, high: float) -> None:
        """Refuse times from `low` to `high` that are not inside the domain.

        Raises
        ------
        ArgumentError
        """
        first, last = self._domain
        if not (first <= low and high <= last):
            span = f"{low!r}" if low == high else f"{low!r} to {high!r}"
            checks.refuse(
                "time",
                f"needs the drive at {span}, and it is defined from {first!r} to {last!r}",
                low if low < first else high,
                "define it there (negative weights of a formula look outside of the evolution's interval)",
            )

    def rotations(
        self,
        formula: Formula,
        rule: str | Partition,
        time: float,
        steps: int,
        start: float = 0.0,
    ) -> Rotations:
        """Build the circuit of `steps` equal steps from time `start` to `start + time`.

        Parameters
        ----------
        formula : Formula
        rule : str or Partition
            ``"terms"`` makes each term H_k a part, in the given order. A rule of `Partition.of` distributes the strings
            of `strings`. A Partition says which strings share a part and in which order the parts stand; its
            coefficients are not read. Strings of a part commute pairwise, so they do at unequal times.
        time : float
            Total time; negative to run backwards from `start`.
        steps : int
        start : float, optional

        Returns
        -------
        Rotations
            One block, since the angles of each step differ; where every strength is `Constant`, the repeated blocks of
            `Formula.rotations`. Identity terms become the phase, by the formula's own quadrature.

        Raises
        ------
        ArgumentError
            Times or steps out of range, a drive that is not defined wherever the formula samples it, a strength that is
            no finite number there, angles too large for a float, or more than 10**7 rotations.
        PartitionError
            Strings of a part that do not commute, an unknown rule, a partition of other strings.
        FormulaError
            The formula requires a structure of its parts, and a strength changes with time or they lack it.
        MemoryRefusedError
            The rotations do not fit: about 100 bytes each while they are made.

        Notes
        -----
        Time is one more operator, whose flow advances a clock, and stands before the first part [1]_. In a step from t
        of length τ a forward stage of weight w advances the clock by w τ and then freezes all strengths at the new
        time; a reverse stage freezes first and advances after. For Strang this is the midpoint rule. So every formula
        keeps its order where the strengths are smooth enough. Partial sums of weights leave [0, 1] where weights are
        negative, and then strengths are sampled outside of the evolution's interval. At kinks the order drops; put step
        ends there.

        Adjacent runs of one part merge, across stages and steps: r Strang steps of m parts cost r (2m - 2) + 1
        parts. The clock is within 4 u (\\|start\\| + \\|time\\|) of its exact reading, u = 2**-53, and what lies beyond the
        domain by no more than rounding is taken at its end. Rotations of angle zero are left out; what then meets is
        not merged.

        References
        ----------
        .. [1] N. Wiebe, D. W. Berry, P. Høyer, B. C. Sanders, "Higher order decompositions of ordered operator
           exponentials", J. Phys. A 43, 065203 (2010), arXiv 0812.0562; M. Suzuki, "General theory of fractal path
           integrals", J. Math. Phys. 32, 400 (1991). From memory.
        """
        if not isinstance(formula, Formula):
            checks.refuse("formula", "is no Formula", formula, "take one from trueturn.formula")
        length, begin = checks.number("time", time), checks.number("start", start)
        count = checks.whole("steps", steps, 1)
        parts = driven_parts(self, rule)
        if self.constant:
            return self._static(formula, parts, length, count)
        return equal_steps(self, Clock(formula, len(parts)), parts, begin, length, count)

    def _static(self, formula: Formula, parts: Sequence[DrivenPart], time: float, steps: int) -> Rotations:
        values = np.array([self.strengths(0.0)])
        identity = Operator("1", qubits=self._qubits) * math.fsum(
            value * operator.identity_coefficient for value, (_, operator) in zip(values[0], self._terms, strict=True)
        )
        operators = [Operator.from_masks(part.x, part.z, part.coefficients(values)[0], self._qubits) for part in parts]
        return formula.rotations(Partition([*operators, identity]), time, steps)

    def __len__(self) -> int:
        return len(self._terms)

    def __repr__(self) -> str:
        low, high = self._domain
        return f"<Driven on {self._qubits} qubits: {len(self._terms)} terms, defined from {low!r} to {high!r}>"


def _widened(operator: Operator, qubits: int) -> Operator:
    if operator.qubits == qubits:
        return operator
    return Operator.from_masks(operator.x_masks, operator.z_masks, operator.coefficients, qubits)
