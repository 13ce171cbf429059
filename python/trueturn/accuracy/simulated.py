"""What a circuit really simulates: the effective Hamiltonian of one step, as a truncated series.

One step of length τ is exp(-iτ H_sim(τ)) with

    H_sim(τ) = E_1 + τ E_2 + τ² E_3 + …,    E_1 = H,

where E_k holds brackets of k parts (Baker, Campbell, Hausdorff). A circuit of r equal steps is then exactly
exp(-i t H_sim(t/r)) wherever the series converges, and its error is that of a slightly different Hamiltonian. Here the
series is cut after a degree. Nothing is claimed about its convergence: for fixed τ and growing systems it may well be
asymptotic only, and what the cut leaves out is not bounded here.

See `trueturn.accuracy.lie_series` for how E_k is computed.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from trueturn.accuracy.lie_series import logarithm_of_exponentials, logarithm_of_letters
from trueturn.accuracy.norms import SMALL_QUBITS, quick, thorough
from trueturn.errors import ArgumentError, AuditError
from trueturn.formulas import Formula, formula
from trueturn.formulas.order import logarithm_words
from trueturn.formulas.processed import Processed
from trueturn.formulas.structure import require_structure
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.randomised.checks import as_int, checked_partition, finite

if TYPE_CHECKING:
    from trueturn.accuracy.error_split import ErrorSplit
    from trueturn.accuracy.prediction import Prediction
    from trueturn.state import State

__all__ = ["MOST_DEGREE", "SimulatedSeries", "TermSize", "simulated_hamiltonian", "simulated_series"]

MOST_DEGREE = 12
"""Formulas are measured up to this order; long before it the operators outgrow patience on more than a few qubits."""

_FEW_TERMS = 100
_NOISE = 1e-15


@dataclass(frozen=True)
class TermSize:
    """The size of one term τ^(k-1) E_k of the effective Hamiltonian.

    Attributes
    ----------
    degree : int
        k: the number of parts in each bracket.
    strings : int
    one_norm : float
        Sum of |coefficients|; bounds the spectral norm.
    norm_bound : float
        A proven upper bound on the spectral norm, the identity removed: by every route of `trueturn.accuracy.norms` on
        up to 8 qubits or 100 strings, else by anticommuting groups.
    root_mean_square : float
        √Σc², the Frobenius norm over 2^(n/2).
    """

    degree: int
    strings: int
    one_norm: float
    norm_bound: float
    root_mean_square: float


@dataclass(frozen=True)
class SimulatedSeries:
    """The effective Hamiltonian of one step as a series in the step time, cut after a degree.

    Made by `simulated_series`.

    Attributes
    ----------
    formula : Formula or Processed
    partition : Partition
    terms : tuple of Operator
        E_1 = H, E_2, …: ``terms[k - 1]`` goes with τ^(k-1). Operators without terms where E_k vanishes.
    """

    formula: Formula | Processed
    partition: Partition
    terms: tuple[Operator, ...]

    @property
    def order(self) -> int:
        """Degree after which the series is cut."""
        return len(self.terms)

    @cached_property
    def leading_degree(self) -> int | None:
        """Degree of the first error term, or None where all that were computed vanish.

        A term counts as vanished below 1e-15 Σ|c| (2g)^(k-1), g the largest Σ|c| at one qubit: what rounding can leave.
        """
        hamiltonian = self.terms[0].without_identity()
        scale, growth = hamiltonian.one_norm(), 2.0 * _strength_at_a_qubit(hamiltonian)
        for degree, term in enumerate(self.terms[1:], start=2):
            if len(term) and term.one_norm() > _NOISE * scale * growth ** (degree - 1):
                return degree
        return None

    @property
    def leading(self) -> Operator:
        """The leading error E: the step simulates H + τ^p E + O(τ^(p+1)), p = ``leading_degree - 1``.

        Raises
        ------
        AuditError
            Every error term that was computed vanishes.
        """
        if self.leading_degree is None:
            raise AuditError(
                f"order: no error of {self.formula.name} on these parts up to brackets of {self.order} parts; "
                f"ask for a larger order ({self.formula.order + 1} at least), or the formula is exact here",
                reason="no error term",
                limit=self.order,
            )
        return self.terms[self.leading_degree - 1]

    def at(self, step_time: float) -> Operator:
        """Return Σ_k τ^(k-1) E_k for a step time τ.

        Raises
        ------
        ArgumentError
            `step_time` is not a finite number, or so large that a coefficient overflows.
        """
        step = _step(step_time)
        total = self.terms[0]
        for power, term in enumerate(self.terms[1:], start=1):
            if len(term) and step:
                factor = _power(step, power)
                if not math.isfinite(factor * term.one_norm()):
                    raise ArgumentError(
                        f"step_time: makes coefficients of τ^{power} too large for a float ({step_time!r}); give a shorter "
                        "step, or a lower order",
                        argument="step_time",
                        value=step_time,
                    )
                total = total + term * factor
        return total

    def sizes(self, step_time: float = 1.0) -> tuple[TermSize, ...]:
        """Return the size of each term τ^(k-1) E_k, from k = 1 on.

        Raises
        ------
        ArgumentError
            `step_time` is not a finite number.
        """
        step = abs(_step(step_time))
        return tuple(_size(degree, term, _power(step, degree - 1)) for degree, term in enumerate(self.terms, start=1))

    def split(
        self, *, weight: int | None = None, diameter: int | None = None, observable: Operator | None = None
    ) -> ErrorSplit:
        """Split the leading error as i[H, G] + c H + rest; see `trueturn.split_error`."""
        from trueturn.accuracy.error_split import split_error

        return split_error(self.leading, self.terms[0], weight=weight, diameter=diameter, observable=observable)

    def predict(
        self,
        state: State,
        time: float,
        observables: Mapping[str, Operator] | None = None,
        *,
        threads: int | None = None,
    ) -> dict[str, Prediction]:
        """Predict the leading law error ≈ prefactor / steps^p; see `trueturn.accuracy.prediction`."""
        from trueturn.accuracy.prediction import predict

        return predict(self, state, time, observables, threads=threads)

    def __repr__(self) -> str:
        counts = ", ".join(str(len(term)) for term in self.terms)
        return f"<SimulatedSeries of {self.formula.name!r} cut after degree {self.order}: {counts} strings by degree>"


def simulated_series(formula: Formula | Processed | str, partition: Partition, order: int) -> SimulatedSeries:
    """Expand the effective Hamiltonian of one step in the step time.

    Parameters
    ----------
    formula : Formula, Processed or str
        Of a processed formula the whole: pre-step, kernel, post-step.
    partition : Partition
    order : int
        Largest number of parts in a bracket, 1 to 12; τ^(order - 1) is the highest power of the step time. The error of
        a formula of order p starts at p + 1.

    Returns
    -------
    SimulatedSeries

    Raises
    ------
    ArgumentError
        `formula` or `partition` are none, or `order` is out of range.
    FormulaError
        The formula is unknown, or the partition lacks what it requires.
    MemoryRefusedError
        A bracket outgrows the memory available.

    Notes
    -----
    E_2 … E_p are zero for a formula of order p; that its weights are rounded, and miss this by some 1e-15, is left out.
    Coefficients are sums of nested brackets in double precision, good to some 1e-15 of the largest contribution;
    strings whose contributions cancel can stay with such a coefficient. Degree 5 takes some hundredths of a second on
    a Heisenberg ring of 12 qubits; strings, memory and time grow by a factor of about 5 with each degree there.

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> print(tt.simulated_series("lie", parts, 2).terms[1])  # i[X, Z] / 2
    1.0 Y_0
    """
    chosen = _checked_formula(formula)
    checked_partition(partition)
    if isinstance(chosen, Formula):
        require_structure(chosen, partition)
    degree = _checked_degree(order)
    hamiltonian = partition.operator()
    terms = [hamiltonian, *[hamiltonian * 0.0] * (degree - 1)]
    if partition.parts and degree > 1:
        letters = logarithm_of_exponentials(partition.parts, degree)
        words = logarithm_words(chosen.exact_stages(), degree)
        errors = {word: value for word, value in words.items() if sum(word) > max(1, chosen.order)}
        for k, term in logarithm_of_letters(letters, errors, degree).items():
            terms[k - 1] = term
    return SimulatedSeries(chosen, partition, tuple(terms))


def simulated_hamiltonian(
    formula: Formula | Processed | str, partition: Partition, step_time: float, order: int
) -> Operator:
    """Return the Hamiltonian that one step of a formula simulates, as a truncated series.

    Parameters
    ----------
    formula : Formula, Processed or str
    partition : Partition
    step_time : float
        τ: the time of one step; may be negative.
    order : int
        Largest number of parts in a bracket, 1 to 12. 1 gives H itself; the error of a formula of order p starts at
        p + 1.

    Returns
    -------
    Operator
        H_sim = H + Σ_k τ^(k-1) E_k up to k = `order`, with step = exp(-iτ H_sim) up to terms of degree `order` + 1
        in the exponent. The series is cut and nothing is claimed about its convergence.

    Raises
    ------
    ArgumentError, FormulaError, MemoryRefusedError
        As for `simulated_series`; or `step_time` is not a finite number, or so large that a coefficient overflows.

    References
    ----------
    .. [1] E. Hairer, C. Lubich, G. Wanner, Geometric Numerical Integration, 2nd ed., Springer (2006), chapters III.4
       and IX, for modified equations and their cut; from memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> print(tt.simulated_hamiltonian("lie", parts, 0.1, 2))
    1.0 X_0 + 1.0 Z_0 + 0.1 Y_0
    """
    step = _step(step_time)
    return simulated_series(formula, partition, order).at(step)


def _checked_formula(given: Formula | Processed | str) -> Formula | Processed:
    chosen = formula(given) if isinstance(given, str) else given
    if not isinstance(chosen, (Formula, Processed)):
        raise ArgumentError(
            f"formula: neither a name nor a Formula nor a Processed ({given!r}); see trueturn.formulas()",
            argument="formula",
            value=given,
        )
    return chosen


def _checked_degree(order: object) -> int:
    degree = as_int(order)
    if not isinstance(degree, int) or isinstance(degree, bool) or not 1 <= degree <= MOST_DEGREE:
        raise ArgumentError(
            f"order: is not a whole number from 1 to {MOST_DEGREE} ({order!r}); "
            "give the largest number of parts in a bracket",
            argument="order",
            value=order,
        )
    return degree


def _step(step_time: object) -> float:
    return finite("step_time", step_time, "give the time of one step, such as 0.1")


def _power(step: float, power: int) -> float:
    try:
        return step**power
    except OverflowError:
        return math.inf


def _size(degree: int, term: Operator, factor: float) -> TermSize:
    bare = term.without_identity()
    rule = thorough if bare.qubits <= SMALL_QUBITS or len(bare) <= _FEW_TERMS else quick
    return TermSize(
        degree=degree,
        strings=len(bare),
        one_norm=factor * bare.one_norm(),
        norm_bound=factor * rule(bare).value,
        root_mean_square=factor * math.sqrt(math.fsum(np.square(bare.coefficients))),
    )


def _strength_at_a_qubit(operator: Operator) -> float:
    strengths = [0.0] * operator.qubits
    for x, z, coefficient in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True):
        mask = x | z
        while mask:
            strengths[mask.bit_length() - 1] += abs(coefficient)
            mask ^= 1 << (mask.bit_length() - 1)
    return max(strengths)
