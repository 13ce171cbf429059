"""Proven upper bounds on the error of product formulas."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from numbers import Integral, Real

from trueturn.errors import ArgumentError, FormulaError
from trueturn.formulas import Formula
from trueturn.operator import Operator
from trueturn.partition import Partition
from trueturn.reference.certificate import norm_bound

__all__ = ["Bound", "bound"]

_SOURCE = "A. M. Childs, Y. Su, M. C. Tran, N. Wiebe, S. Zhu, Theory of Trotter error, Phys. Rev. X 11, 011020 (2021)"
_COVERED = ("lie", "strang")
# A spectral interval of more than this costs seconds, and saves less than a factor of two on brackets of local terms.
_SMALL_QUBITS = 8
_FEW_TERMS = 100


@dataclass(frozen=True)
class Bound:
    """A proven upper bound on the spectral-norm distance between a circuit and exp(-iHt).

    Attributes
    ----------
    value : float
    theorem : str
        Which statement of the source.
    source : str
    kind : str
        ``"proven"``.
    """

    value: float
    theorem: str
    source: str
    kind: str = "proven"


def bound(formula: Formula, partition: Partition, time: float, steps: int) -> Bound:
    """Return a proven bound on ‖S - exp(-iHt)‖ for `steps` equal steps of a formula.

    With parts A_1 … A_m in time order and G_k = A_{k+1} + … + A_m:
    first order  t²/(2r) Σ_k ‖[G_k, A_k]‖ (Proposition 9);
    second order t³/(12 r²) Σ_k ‖[G_k, [G_k, A_k]]‖ + t³/(24 r²) Σ_k ‖[A_k, [A_k, G_k]]‖ (Proposition 10; the
    proposition numbers are from memory and differ between printings).

    Parameters
    ----------
    formula : Formula
        One whose stages are those of lie or strang.
    partition : Partition
    time : float
    steps : int

    Returns
    -------
    Bound

    Raises
    ------
    FormulaError
        No theorem at hand covers the formula; `choices` names those that are covered.
    ArgumentError
        `time` is not finite or `steps` is not a positive whole number.

    Notes
    -----
    Nested brackets come from the Pauli algebra. Their norms are bounded by proven spectral intervals (up to 8 qubits or
    100 terms) or by the sum of |coefficients|, so the value is an upper bound of the theorem's own.

    References
    ----------
    .. [1] A. M. Childs, Y. Su, M. C. Tran, N. Wiebe, S. Zhu, Theory of Trotter error with commutator scaling,
       Phys. Rev. X 11, 011020 (2021).
    """
    if not isinstance(formula, Formula) or not isinstance(partition, Partition):
        raise ArgumentError(
            f"formula, partition: not a Formula and a Partition ({type(formula).__name__}, {type(partition).__name__}); "
            "make them by trueturn.formula and Partition.of",
            argument="formula",
            value=formula,
        )
    if isinstance(time, bool) or not isinstance(time, Real) or not math.isfinite(time):
        raise ArgumentError(f"time: not finite ({time!r}); give a finite time", argument="time", value=time)
    if isinstance(steps, bool) or not isinstance(steps, Integral) or steps < 1:
        raise ArgumentError(
            f"steps: not a positive whole number ({steps!r}); give 1 or more", argument="steps", value=steps
        )
    weights = tuple((stage.weight, stage.direction) for stage in formula.stages)
    if weights in (((1.0, "forward"),), ((1.0, "reverse"),)):
        value = 0.5 * abs(time) * (abs(time) / steps) * _first_order_sum(partition)
        return Bound(value, "Proposition 9 (first order)", _SOURCE)
    if weights == ((0.5, "forward"), (0.5, "reverse")):
        outer, inner = _second_order_sums(partition)
        # Factor by factor, so that a huge time gives infinity rather than an overflow.
        value = abs(time) * (abs(time) / steps) * (abs(time) / steps) * (outer / 12.0 + inner / 24.0)
        return Bound(value, "Proposition 10 (second order)", _SOURCE)
    raise FormulaError(
        f"formula: no proven bound at hand for {formula.name!r}; bounds are defined for {', '.join(_COVERED)}",
        name=formula.name,
        choices=_COVERED,
    )


def _rests(partition: Partition) -> list[tuple[Operator, Operator]]:
    """Return (A_k, A_{k+1} + … + A_m) for all parts but the last."""
    pairs = []
    rest: Operator | None = None
    for part in reversed(partition.parts):
        if rest is not None:
            pairs.append((part, rest))
        rest = part if rest is None else rest + part
    return pairs[::-1]


def _norm(operator: Operator) -> float:
    """Bound a norm: by a spectral interval where that is quick, else by the triangle inequality."""
    if len(operator) == 0:
        return 0.0
    if operator.qubits <= _SMALL_QUBITS or len(operator) <= _FEW_TERMS:
        return norm_bound(operator)
    return operator.without_identity().one_norm()


@lru_cache(maxsize=32)
def _first_order_sum(partition: Partition) -> float:
    return math.fsum(_norm(rest.bracket(part)) for part, rest in _rests(partition)) * (1.0 + 1e-12)


@lru_cache(maxsize=32)
def _second_order_sums(partition: Partition) -> tuple[float, float]:
    outer, inner = [], []
    for part, rest in _rests(partition):
        once = rest.bracket(part)
        if len(once):
            outer.append(_norm(rest.bracket(once)))
            inner.append(_norm(part.bracket(once)))
    return math.fsum(outer) * (1.0 + 1e-12), math.fsum(inner) * (1.0 + 1e-12)
