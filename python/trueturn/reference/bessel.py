"""Bessel functions J_k(x) with proven errors, and the tail of the Chebyshev series of exp(-ixy)."""

from __future__ import annotations

import math
from decimal import Context, Decimal
from functools import lru_cache

import numpy as np
import numpy.typing as npt

__all__ = ["bessel_values", "least_degree", "tail_bound", "truncation"]

_PRECISION = 50
_NEGLIGIBLE = 1e-45
_GOLDEN = (math.sqrt(5.0) - 1.0) / 2.0


def tail_bound(x: float, degree: int) -> float:
    """Return a proven bound on Σ_{k > degree} 2 |J_k(x)|: 2 e^{x(ρ-1/ρ)/2} ρ^{-degree} / (ρ-1), least over ρ > 1.

    Cauchy's estimate on the circle of radius ρ gives |J_k(x)| ≤ e^{x(ρ-1/ρ)/2} ρ^{-k}; the sum is geometric. Any ρ > 1
    is valid, so the minimisation need not be exact.
    """
    x = abs(x)
    if x == 0.0:
        return 0.0

    def logarithm(log_rho_minus_one: float) -> float:
        excess = math.exp(log_rho_minus_one)
        rho = 1.0 + excess
        return x * (rho - 1.0 / rho) / 2.0 - degree * math.log1p(excess) - log_rho_minus_one

    # Golden sections leave less than 1e-6 of the range. No library, since importing one takes longer.
    low, high = -12.0, min(700.0, math.log(4.0 * (degree + 1) / x + 4.0))
    left, right = high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
    at_left, at_right = logarithm(left), logarithm(right)
    for _ in range(30):
        if at_left < at_right:
            high, right, at_right = right, left, at_left
            left = high - _GOLDEN * (high - low)
            at_left = logarithm(left)
        else:
            low, left, at_left = left, right, at_right
            right = low + _GOLDEN * (high - low)
            at_right = logarithm(right)
    # The exponent is a difference of large numbers: pad it by their rounding.
    padded = min(at_left, at_right) + 1e-13 * (x + degree + 10.0)
    return 2.0 * math.exp(min(padded, 700.0))


def _start_degree(x: float) -> int:
    degree = max(8, math.ceil(abs(x)))
    while tail_bound(x, degree) > _NEGLIGIBLE:
        degree += max(4, degree // 16)
    return degree


@lru_cache(maxsize=512)
def bessel_values(x: float) -> npt.NDArray[np.float64]:
    """Return J_0(x), J_1(x), … up to a degree past which the whole tail is below 1e-45.

    Notes
    -----
    Miller's backward recurrence J_{k-1} = (2k/x) J_k - J_{k+1} in 50 decimal digits, normalised by
    J_0 + 2 Σ J_{2k} = 1. Starting with 0 and 1 at degrees M+1 and M mixes in a multiple |J_{M+1}(x) / Y_{M+1}(x)| of Y_k,
    which is below |J_{M+1}| for k up to M: at most 1e-45. Backwards the recurrence damps its own rounding. So each value
    is J_k rounded to double precision: within 2**-53 |J_k| + 1e-40.
    """
    if x == 0.0:
        return np.ones(1)
    context = Context(prec=_PRECISION, Emin=-(10**9), Emax=10**9)
    exact_x = Decimal(abs(x))
    start = _start_degree(x)
    values = [Decimal(0)] * (start + 2)
    values[start] = Decimal(1)
    factor = context.divide(Decimal(2), exact_x)
    for k in range(start, 0, -1):
        scaled = context.multiply(context.multiply(factor, Decimal(k)), values[k])
        values[k - 1] = context.subtract(scaled, values[k + 1])
    norm = values[0]
    for k in range(2, start + 1, 2):
        norm = context.add(norm, context.multiply(Decimal(2), values[k]))
    found = [float(context.divide(value, norm)) for value in values[: start + 1]]
    if x < 0.0:
        found[1::2] = [-value for value in found[1::2]]
    array = np.array(found)
    array.flags.writeable = False
    return array


@lru_cache(maxsize=512)
def _suffix_sums(x: float) -> npt.NDArray[np.float64]:
    """Return bounds on Σ_{k > K} 2 |J_k(x)| for each K up to the last computed degree."""
    values = np.abs(bessel_values(x))
    # 1e-12 pads for the rounding of values and sums (up to 10^4 terms of 1.1e-16), 1e-39 for their absolute error.
    dropped = np.append(2.0 * values[1:] * (1.0 + 1e-12) + 1e-39, tail_bound(x, len(values) - 1))
    return np.asarray(np.cumsum(dropped[::-1])[::-1] * (1.0 + 1e-12))


def truncation(x: float, degree: int) -> float:
    """Return a proven bound on the error of the Chebyshev series of exp(-ixy), |y| ≤ 1, cut after `degree`.

    The computed |J_k| are added up to where the rest is below 1e-45, so the bound is as tight as the triangle inequality.
    """
    sums = _suffix_sums(x)
    return float(sums[degree]) if degree < len(sums) else tail_bound(x, degree)


def least_degree(x: float, allowed: float) -> int:
    """Return the least degree, at least 1, at which `truncation` is at most `allowed` (and allowed at least 1e-40)."""
    sums = _suffix_sums(x)
    return max(1, int(np.searchsorted(-sums, -max(allowed, 1e-40))))
