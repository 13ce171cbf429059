"""How far one deterministic formula is from exp(-iHt) when its parts are any operators, exact inside.

Unlike `trueturn.bound`, this needs no rotations of the parts, so a part may hold terms that do not commute: the tail
of a partially randomised formula, for instance.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from trueturn.accuracy.analytic import power_series_bound
from trueturn.accuracy.commutators import first_order_sum, second_order_sums
from trueturn.accuracy.norms import Norm
from trueturn.formulas import Formula
from trueturn.operator import Operator
from trueturn.reference.certificate import norm_bound

__all__ = ["operator_norm", "order_free_error", "split_error"]

# A spectral interval of more than this costs seconds.
_SMALL_QUBITS = 8
_FEW_TERMS = 100


def operator_norm(operator: Operator) -> float:
    """Bound a spectral norm, the identity left out: by a spectral interval where that is quick, else by Σ|c|."""
    bare = operator.without_identity()
    simple = bare.one_norm()
    if len(bare) > 1 and (bare.qubits <= _SMALL_QUBITS or len(bare) <= _FEW_TERMS):
        return min(simple, norm_bound(bare))
    return simple


def order_free_error(formula: Formula, strength: float, steps: int) -> float:
    """Bound ‖S - exp(-iHt)‖ for any order of the parts, in each step another one if need be.

    Parameters
    ----------
    formula : Formula
        Of order p; W is the sum of its |weights|.
    strength : float
        Σ‖A_k‖ |t| over the parts.
    steps : int
    """
    return power_series_bound(math.fsum(abs(stage.weight) for stage in formula.stages), strength, formula.order, steps)


def split_error(formula: Formula, parts: Sequence[Operator], time: float, steps: int) -> float:
    """Bound ‖S - exp(-iHt)‖ for parts in this order, each exponentiated exactly; at most 2.

    Notes
    -----
    Lie and Strang: Propositions 9 and 10 of [1]_, valid for any Hermitian parts, with G_k = A_{k+1} + … + A_m:
    t²/(2r) Σ‖[G_k, A_k]‖ and t³/(12r²) Σ‖[G_k, [G_k, A_k]]‖ + t³/(24r²) Σ‖[A_k, [A_k, G_k]]‖. Others:
    `order_free_error`. The least of what applies is taken.

    References
    ----------
    .. [1] A. M. Childs, Y. Su, M. C. Tran, N. Wiebe, S. Zhu, Theory of Trotter error with commutator scaling,
       Phys. Rev. X 11, 011020 (2021), from memory.
    """
    span = abs(time)
    best = min(2.0, order_free_error(formula, math.fsum(map(operator_norm, parts)) * span, steps))
    stages = tuple((stage.weight, stage.direction) for stage in formula.stages)
    first = stages in (((1.0, "forward"),), ((1.0, "reverse"),))
    if not first and stages != ((0.5, "forward"), (0.5, "reverse")):
        return best
    if first:
        value = span**2 / (2.0 * steps) * first_order_sum(parts, _rule).value
    else:
        outer, inner = second_order_sums(parts, _rule)
        value = span**3 / steps**2 * (outer.value / 12.0 + inner.value / 24.0)
    return min(best, value * (1.0 + 1e-12))


def _rule(operator: Operator) -> Norm:
    return Norm(operator_norm(operator), "")
