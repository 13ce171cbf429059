"""Norms of sums of Pauli strings, bounded by the tightest rigorous route that fits.

A `Norm` carries the name of the route that gave it. Spectral norms are bounds from above; the Frobenius norm over
√(2^n), which is the root of Σc² because strings are orthogonal, is exact. The identity is left out: a bracket has
none.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from functools import partial

import numpy as np

from trueturn.operator import Operator
from trueturn.reference.spectrum import SpectralInterval, spectral_report

__all__ = ["Norm", "NormRule", "affordable", "frobenius", "joined_routes", "quick", "thorough"]

FROBENIUS = "Frobenius norm"
TRIANGLE = "triangle inequality"
ANTICOMMUTING = "anticommuting groups"

SMALL_QUBITS = 8
"""Up to here a spectral norm is that of a matrix."""

MANY_TERMS = 50_000
"""Above it the routes of `spectral_report` take more than a few seconds for one norm."""

MOST_DENSE_WORK = 3 * 10**8
"""Cubes of dimensions that dense algebra may take for all norms of one bound."""

CALL_WORK = 40_000
"""The same for the least that one such norm takes, about a millisecond."""

FEW_NORMS = 8
"""Norms by clusters that one bound may take beyond small systems, each up to seconds."""

EFFORT = 1 / 32
"""Of `spectral_report`: a fraction of a second for a norm beyond small systems, and a few per cent looser."""

# Sums of up to 2^26 numbers, pairwise or exact, and a square root: far below one part in 10^14.
_ROUNDING = 1.0 + 1e-14


@dataclass(frozen=True)
class Norm:
    """An upper bound on a norm, and how it was obtained."""

    value: float
    route: str


NormRule = Callable[[Operator], Norm]


def frobenius(operator: Operator) -> Norm:
    """Return ‖A‖_F / √(2^n) = √(Σc²)."""
    return Norm(math.sqrt(math.fsum(np.square(operator.coefficients))) * _ROUNDING, FROBENIUS)


def quick(operator: Operator) -> Norm:
    """Bound a spectral norm by anticommuting groups.

    Strings that anticommute pairwise satisfy (Σ c_j P_j)² = Σ c_j², so a group has the norm √(Σ c_j²), and the groups
    add up by the triangle inequality. Where every string is a group of its own this is Σ|c|.
    """
    value, groups = operator._terms.anticommuting_norm()
    return Norm(value * _ROUNDING, ANTICOMMUTING if groups < len(operator) else TRIANGLE)


def thorough(operator: Operator, effort: float = 1.0) -> Norm:
    """Bound a spectral norm by every route that fits: dense algebra, commuting groups, clusters, anticommuting groups.

    `effort` is the share of the usual work that groups and clusters may take.
    """
    if len(operator) == 0:
        return Norm(0.0, TRIANGLE)
    simple = quick(operator)
    if len(operator) == 1 or (operator.qubits > SMALL_QUBITS and len(operator) > MANY_TERMS * effort):
        return simple
    report = spectral_report(operator, EFFORT * effort)
    exact = _largest(report)
    if exact.value >= simple.value and exact.route != "dense":
        return simple
    return exact


def _largest(report: SpectralInterval) -> Norm:
    """The larger end in size; nothing has an identity term here."""
    route = "triangle inequality" if report.route == "coefficients" else report.route
    return Norm(max(abs(report.low), abs(report.high)), route)


def joined_routes(routes: Iterable[str]) -> str:
    """Join the routes of several norms, each named once, in order of appearance."""
    return ", ".join(dict.fromkeys(routes))


def affordable(count: int, qubits: int, effort: float = 1.0) -> NormRule:
    """Choose the thorough rule where `count` norms by it take seconds, or that share of them, else the quick one."""
    each = max(1 << 3 * qubits, CALL_WORK)
    fits = count * each <= MOST_DENSE_WORK * effort if qubits <= SMALL_QUBITS else count <= FEW_NORMS
    return partial(thorough, effort=effort) if fits else quick
