"""Proved enclosures of the spectrum of an operator.

The Chebyshev expansion of an evolution costs in proportion to the width of the interval it is given, and is
wrong without warning if an eigenvalue lies outside. So the interval must be proved, and it pays to make it
tight.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trueturn._native import Terms
from trueturn.errors import OperatorError
from trueturn.operator import Operator
from trueturn.reference import _clusters
from trueturn.reference._extremes import (
    Scaled,
    commuting_extremes,
    dense_extremes,
    down,
    sum_down,
    sum_up,
    triangle,
    up,
)

__all__ = ["RouteInterval", "SpectralInterval", "spectral_interval", "spectral_report"]

DENSE_QUBITS = 8
RANK_CAP = 20
GROUP_TERMS = 20_000
GROUP_ENTRIES = 1 << 24
CLUSTER_COST = 8 * 8**10
SMALLEST_CLUSTER = 4


@dataclass(frozen=True)
class RouteInterval:
    """What one route proves: every eigenvalue is within [low, high]."""

    route: str
    low: float
    high: float


@dataclass(frozen=True)
class SpectralInterval:
    """A proved enclosure of a spectrum.

    Attributes
    ----------
    low, high : float
        Every eigenvalue is within [low, high], rounding included.
    route : str
        The route that gave both ends, or the two joined by ``" and "`` (low first).
    routes : tuple of RouteInterval
        All that were tried: ``"coefficients"``, ``"commuting groups"``, ``"clusters"``, ``"dense"``.
    """

    low: float
    high: float
    route: str
    routes: tuple[RouteInterval, ...]

    @property
    def centre(self) -> float:
        """Midpoint."""
        return self.low / 2 + self.high / 2

    @property
    def half_width(self) -> float:
        """Half the width, rounded up: centre ± half_width encloses the interval."""
        return up(max(self.high - self.centre, self.centre - self.low))


def spectral_interval(operator: Operator) -> tuple[float, float]:
    """Return (low, high), proved to enclose every eigenvalue; see `spectral_report`."""
    report = spectral_report(operator)
    return report.low, report.high


def spectral_report(operator: Operator, effort: float = 1.0) -> SpectralInterval:
    """Enclose the spectrum of an operator by several routes and take the tightest ends.

    Parameters
    ----------
    operator : Operator
    effort : float
        Share of the usual work that commuting groups and clusters may take; the interval is proved all the same.

    Returns
    -------
    SpectralInterval

    Raises
    ------
    OperatorError
        If `operator` is no operator, or the interval exceeds the range of double precision.

    Notes
    -----
    With c_0 the coefficient of the identity and c_j the others, the routes are

    - coefficients: c_0 ± Σ|c_j|;
    - commuting groups: the terms are put greedily into commuting groups, each group into pieces that share
      no qubit, and the exact extremes of the pieces, found by listing joint eigenvalues (at most 2^20 in a
      piece), are added up;
    - clusters: the terms are dealt out to clusters of at most q neighbouring qubits, q = 10 for 18 qubits
      and more, 8 for 13 to 17 and 6 below, less where that would take too long, and the extremes of the
      clusters are added up [1]_; equal clusters are solved once; the same for q - 1, and the tighter ends count;
    - dense: up to 8 qubits in use, the whole operator at once, instead of all the others.

    Adding up extremes bounds a sum from outside (Weyl). Each route is limited to about a second or two;
    what exceeds the limit is bounded by Σ|c|, so the result is an enclosure whatever the operator. Rounding
    is padded at each stage, as derived in `dense_extremes` and `commuting_extremes`; sums are rounded
    outward.

    References
    ----------
    .. [1] P. W. Anderson, Limits on the energy of the antiferromagnetic ground state, Phys. Rev. 83, 1260
    (1951).

    Examples
    --------
    >>> from trueturn import Operator
    >>> report = spectral_report(Operator("X_0 X_1 + Y_0 Y_1 + Z_0 Z_1"))
    >>> round(report.low, 6), round(report.high, 6), report.route
    (-3.0, 1.0, 'dense')
    """
    if not isinstance(operator, Operator):
        message = f"operator: not an Operator ({type(operator).__name__}); give an Operator"
        raise OperatorError(message, argument="operator")
    terms, exponent = _scaled(operator)
    identity = operator.identity_coefficient
    routes = [RouteInterval("coefficients", -triangle(terms), triangle(terms))]
    support = 0
    for x, z, _ in terms:
        support |= x | z
    if not terms:
        pass
    elif support.bit_count() <= DENSE_QUBITS:
        cluster = _clusters.Cluster.of(terms)
        routes.append(RouteInterval("dense", *dense_extremes(cluster.terms, cluster.qubits)))
    else:
        routes.append(RouteInterval("commuting groups", *_by_groups(terms, effort)))
        routes.append(RouteInterval("clusters", *_by_clusters(terms, support.bit_count(), effort)))
    routes = [_unscaled(route, identity, exponent) for route in routes]
    lowest = max(routes, key=lambda route: route.low)
    highest = min(routes, key=lambda route: route.high)
    names = (lowest.route, highest.route)
    for route in routes:
        if route.low == lowest.low and route.high == highest.high:
            names = (route.route, route.route)
    if not (math.isfinite(lowest.low) and math.isfinite(highest.high)):
        size = f"coefficients up to 2^{exponent}"
        message = f"operator: spectrum beyond double precision ({size}); scale the operator down"
        raise OperatorError(message, argument="operator")
    name = names[0] if names[0] == names[1] else " and ".join(names)
    return SpectralInterval(lowest.low, highest.high, name, tuple(routes))


def _scaled(operator: Operator) -> tuple[list[Scaled], int]:
    """The terms without identity, times 2^-exponent, so that the largest is between 1/2 and 1.

    A coefficient that is rounded by this is below 2^-1021 of the largest, and drowns in the outward
    rounding of sums.
    """
    bare = operator.without_identity()
    exponent = int(np.frexp(np.max(np.abs(bare.coefficients)))[1]) if len(bare) else 0
    coefficients = np.ldexp(bare.coefficients, -exponent).tolist()
    return list(zip(bare.x_masks.tolist(), bare.z_masks.tolist(), coefficients, strict=True)), exponent


def _unscaled(route: RouteInterval, identity: float, exponent: int) -> RouteInterval:
    """Undo the scaling and add the identity, rounding outward."""
    if route.low == route.high == 0.0:
        return RouteInterval(route.route, identity, identity)
    low = _times_power(route.low, exponent, -math.inf)
    high = _times_power(route.high, exponent, math.inf)
    if identity == 0.0:
        return RouteInterval(route.route, low, high)
    return RouteInterval(route.route, down(low + identity), up(high + identity))


def _times_power(value: float, exponent: int, outward: float) -> float:
    try:
        result = math.ldexp(value, exponent)
    except OverflowError:
        return outward
    return result if math.ldexp(result, -exponent) == value else math.nextafter(result, outward)


def _by_groups(terms: Sequence[Scaled], effort: float = 1.0) -> tuple[float, float]:
    if len(terms) > GROUP_TERMS:
        return -triangle(terms), triangle(terms)
    x_masks, z_masks, coefficients = zip(*terms, strict=True)
    native = Terms.from_masks(x_masks, z_masks, np.array(coefficients), None)
    groups: dict[int, list[Scaled]] = {}
    for term, group in zip(terms, native.commuting_groups().tolist(), strict=True):
        groups.setdefault(group, []).append(term)
    allowance = int(GROUP_ENTRIES * effort)
    most = min(RANK_CAP, allowance.bit_length() - 1)
    lows, highs = [], []
    pieces = [piece for group in groups.values() for piece in reversed(_clusters.components(group))]
    while pieces:
        piece = pieces.pop()
        found = commuting_extremes(piece, min(most, allowance.bit_length() - 1))
        if found is not None:
            low, high, listed = found
            allowance -= listed
        elif allowance >= 1 << most and len(piece) > 1:
            half = len(piece) // 2
            pieces += [piece[half:], piece[:half]]
            continue
        else:
            low, high = -triangle(piece), triangle(piece)
        lows.append(low)
        highs.append(high)
    return sum_down(lows), sum_up(highs)


def _by_clusters(terms: Sequence[Scaled], qubits: int, effort: float = 1.0) -> tuple[float, float]:
    size = 10 if qubits >= 18 else 8 if qubits >= 13 else 6
    while True:
        clusters, left_over = _clusters.plan(terms, size)
        excess = sum(cluster.cost for cluster in set(clusters)) / (CLUSTER_COST * effort)
        if excess <= 1 or size <= SMALLEST_CLUSTER:
            break
        # One qubit less is eight times cheaper for each cluster, though there are more of them.
        size = max(SMALLEST_CLUSTER, size - max(1, int(math.log(excess, 8))))
    plans = [(clusters, left_over)]
    if size > SMALLEST_CLUSTER:
        # For an eighth of the work: open antiferromagnetic chains of odd length have less energy a bond to spare.
        plans.append(_clusters.plan(terms, size - 1))
    found = [_added_up(clusters, left_over, effort) for clusters, left_over in plans]
    return max(low for low, _ in found), min(high for _, high in found)


def _added_up(clusters: Sequence[_clusters.Cluster], left_over: Sequence[Scaled], effort: float) -> tuple[float, float]:
    known = {cluster: dense_extremes(cluster.terms, cluster.qubits) for cluster in set(clusters)}
    lows = [known[cluster][0] for cluster in clusters]
    highs = [known[cluster][1] for cluster in clusters]
    if left_over:
        low, high = _by_groups(left_over, effort)
        lows.append(low)
        highs.append(high)
    return sum_down(lows), sum_up(highs)
