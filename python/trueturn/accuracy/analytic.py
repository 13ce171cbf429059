"""Bounds that know the parts by their norms alone: older, looser, and computed at once. For comparison."""

from __future__ import annotations

import math
from functools import cache

from trueturn.formulas import Formula, formula
from trueturn.formulas.base import Stage
from trueturn.formulas.processed import Processed

__all__ = ["counted_bound", "counted_parts", "power_series_bound", "suzuki_level"]

_PAD = 1.0 + 1e-12
SUZUKI_ORDERS = (4, 6, 8)


@cache
def _suzuki_stages() -> dict[tuple[Stage, ...], int]:
    levels = {formula("strang").stages: 1}
    for order in SUZUKI_ORDERS:
        levels[formula(f"suzuki-{order}").stages] = order // 2
    return levels


def suzuki_level(one: Formula | Processed) -> int | None:
    """Return k where the formula is Suzuki's of order 2k (Strang for k = 1), 0 for Lie, else None."""
    if isinstance(one, Processed):
        return None
    if len(one.stages) == 1:
        return 0
    return _suzuki_stages().get(one.stages)


def counted_parts(level: int, parts: int, largest: float) -> float:
    """Return the strength x per unit of time that `counted_bound` needs: L Λ, or 2 L 5^(k-1) Λ."""
    return parts * largest if level == 0 else 2.0 * parts * 5.0 ** (level - 1) * largest


def counted_bound(level: int, strength: float, time: float, steps: int) -> float:
    """Bound Lie's or Suzuki's formula by the number of parts and their largest norm.

    With L parts of norm at most Λ and r steps: (LΛt)²/r exp(LΛt/r) for Lie, and with y = 2 L 5^(k-1) Λ t
    y^(2k+1)/(3 r^(2k)) exp(y/r) for Suzuki's formula of order 2k.

    References
    ----------
    .. [1] A. M. Childs, D. Maslov, Y. Nam, N. J. Ross, Y. Su, Toward the first quantum simulation with quantum
       speedup, Proc. Natl. Acad. Sci. 115, 9456 (2018), arXiv 1711.10980, supplement; from memory.
    """
    x = strength * abs(time) / steps
    if level == 0:
        return _times(steps, x, 2) * _exponential(x) * _PAD
    return _times(steps, x, 2 * level + 1) / 3.0 * _exponential(x) * _PAD


def power_series_bound(weights: float, strength: float, order: int, steps: int) -> float:
    """Bound any formula of order p, whatever the order of the parts: 2 r x^(p+1)/(p+1)! exp(x).

    Parameters
    ----------
    weights : float
        W, the sum of the |weights| of the stages.
    strength : float
        Σ‖A_k‖ |t| over the parts.
    order, steps : int

    Notes
    -----
    With x = W · strength / steps, the coefficients of both power series are at most those of eˣ, and the series agree
    up to order p. So a step is off by at most 2 Σ_{n>p} xⁿ/n! ≤ 2 x^(p+1)/(p+1)! eˣ, and `steps` of them by
    `steps` times that. Derived here; loose, as it knows nothing of commutators.
    """
    x = weights * strength / steps
    return 2.0 * _times(steps, x, order + 1) / math.factorial(order + 1) * _exponential(x) * _PAD


def _times(steps: int, x: float, power: int) -> float:
    """steps · x^power, infinite where it overflows."""
    try:
        return steps * x**power
    except OverflowError:
        return math.inf


def _exponential(x: float) -> float:
    return math.exp(x) if x < 700.0 else math.inf
