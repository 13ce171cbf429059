"""Weights that combine results at several step counts so that the leading errors cancel.

Let a figure at k steps be E(k) = E + c_0 k^-p + c_1 k^-(p+2) + …, the expansion of a symmetric formula of even
order p. With m distinct counts the conditions

    Σ a_j = 1,    Σ a_j k_j^-(p+2i) = 0  for i = 0 … m - 2

leave the first m - 1 terms out. In x_j = k_j² the numbers a_j k_j^-(p+2m-4) annul every polynomial in x of degree
below m - 1, hence they are the coefficients of a divided difference, and

    a_j = k_j^(p+2m-4) / Π_{q≠j} (k_j² - k_q²) / h,

with h the divided difference of x^(p/2+m-2) itself: the complete homogeneous symmetric polynomial of degree p/2 - 1
in the k_j². For p = 2 it is 1, and a_j = Π_{q≠j} k_j² / (k_j² - k_q²). Only ratios of the k_j matter.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from fractions import Fraction
from operator import index

from trueturn.errors import ArgumentError

__all__ = ["checked_steps", "combined_order", "multiproduct_weights", "well_conditioned_steps"]

MOST_TRIED = 300_000
MOST_COUNT = 30
MOST_COST = 2000  # two counts within 2000 are more than MOST_TRIED sequences already
# The norms of two sequences are compared exactly when their rounded values are closer than this. A rounded norm is a
# sum of m positive terms of at most 4 m + p roundings each: far below, for any m that can be searched.
_CLOSE = 1e-9


def multiproduct_weights(steps: Iterable[int], order: int = 2) -> tuple[Fraction, ...]:
    """Return the exact weights that cancel the leading errors of a symmetric formula.

    Parameters
    ----------
    steps : iterable of int
        Distinct positive step counts k_1 … k_m, in any order.
    order : int
        Even order p of the formula.

    Returns
    -------
    tuple of Fraction
        a_j in the order of `steps`; they sum to 1. The combination Σ a_j E(k_j) has order p + 2 (m - 1).

    Raises
    ------
    ArgumentError
        `steps` is empty, or holds a repeated count or one that is no positive whole number; `order` is not a positive
        even number.

    Notes
    -----
    The same weights combine expectations, where every circuit is run by itself, and unitaries in a linear
    combination Σ a_j S(t/k_j)^k_j. Σ |a_j| multiplies whatever is wrong with the single results. Cost: m² products
    of integers.

    References
    ----------
    .. [1] S. A. Chin, "Multi-product splitting and Runge-Kutta-Nyström integrators", Celest. Mech. Dyn. Astron. 106,
       391 (2010): closed form for p = 2. From memory.
    .. [2] G. H. Low, V. Kliuchnikov, N. Wiebe, "Well-conditioned multiproduct Hamiltonian simulation",
       arXiv 1907.11679 (2019). From memory.

    Examples
    --------
    >>> from trueturn.extrapolation import multiproduct_weights
    >>> print(*multiproduct_weights((1, 2, 6)))
    1/105 -1/6 81/70
    """
    counts = checked_steps(steps)
    half = _half_order(order)
    total = _complete_homogeneous([k * k for k in counts], half - 1)
    power = 2 * (half + len(counts) - 2)
    weights = []
    for k in counts:
        below = total * math.prod(k * k - q * q for q in counts if q != k)
        # A single count with p = 2 has power 0: its weight is 1.
        weights.append(Fraction(k**power, below))
    return tuple(weights)


def combined_order(count: int, order: int) -> int:
    """Return the order of a combination of `count` step counts of a formula of even order `order`."""
    return order + 2 * (count - 1)


def well_conditioned_steps(count: int, cost: int, order: int = 2) -> tuple[int, ...]:
    """Find the step counts whose weights have the least 1-norm at a given cost, by looking at all.

    Parameters
    ----------
    count : int
        How many, m.
    cost : int
        Limit on their sum Σ k_j: the steps of all circuits together.
    order : int
        Even order p of the formula.

    Returns
    -------
    tuple of int
        Ascending. Of equal norms the sum is least, then the first in lexical order.

    Raises
    ------
    ArgumentError
        `count` is no positive whole number; `count` is above 30; no `count` distinct step counts cost as little as `cost`
        (the message says the least, m (m + 1) / 2); `order` is not a positive even number; or there are more than
        300000 sequences to look at.

    Notes
    -----
    Only ratios matter, so a sequence can be multiplied by a whole number to make the steps as short as the problem
    needs; the norm stays. The comparison is exact. Seconds for 300000 sequences; less than one for up to 5
    counts at cost 40.

    References
    ----------
    .. [1] G. H. Low, V. Kliuchnikov, N. Wiebe, "Well-conditioned multiproduct Hamiltonian simulation",
       arXiv 1907.11679 (2019): that spread counts keep Σ |a_j| small. From memory.

    Examples
    --------
    >>> from trueturn.extrapolation import multiproduct_weights, well_conditioned_steps
    >>> well_conditioned_steps(3, cost=9), well_conditioned_steps(3, cost=6)
    ((1, 2, 6), (1, 2, 3))
    """
    number, limit = _positive("count", count), _positive("cost", cost)
    half = _half_order(order)
    if number > MOST_COUNT:
        raise ArgumentError(
            f"count: out of range ({number}); give at most {MOST_COUNT} step counts", argument="count", value=count
        )
    if number == 1:
        return (1,)
    least = number * (number + 1) // 2
    if limit < least:
        raise ArgumentError(
            f"cost: too small for {number} distinct step counts ({limit}); give {least} or more",
            argument="cost",
            value=cost,
        )
    if _sequence_count(number, min(limit, MOST_COST)) > MOST_TRIED:
        raise ArgumentError(
            f"cost: more than {MOST_TRIED} sequences of {number} counts to look at ({limit}); "
            "give less, and multiply the counts found by a whole number",
            argument="cost",
            value=cost,
        )
    near: list[tuple[float, tuple[int, ...]]] = []
    best = math.inf
    for counts in _sequences(number, limit, 1):
        norm = _rounded_norm(counts, half)
        if norm <= best * (1.0 + _CLOSE):
            near.append((norm, counts))
            best = min(best, norm)
    finalists = [counts for norm, counts in near if norm <= best * (1.0 + _CLOSE)]
    return min(finalists, key=lambda counts: (_norm(multiproduct_weights(counts, order)), sum(counts), counts))


def checked_steps(steps: Iterable[int]) -> tuple[int, ...]:
    """Return step counts as distinct positive integers, or refuse."""
    try:
        given = list(steps)
    except TypeError:
        given = None
    if not given:
        raise ArgumentError(
            f"steps: no step counts ({steps!r}); give distinct ones, such as (1, 2, 3)", argument="steps", value=steps
        )
    counts = tuple(_positive("steps", k) for k in given)
    for place, k in enumerate(counts):
        if k in counts[:place]:
            raise ArgumentError(
                f"steps: {k} is repeated ({', '.join(map(str, counts))}); give distinct step counts",
                argument="steps",
                value=steps,
            )
    return counts


def _norm(weights: Sequence[Fraction]) -> Fraction:
    return sum((abs(weight) for weight in weights), Fraction(0))


def _positive(argument: str, value: object) -> int:
    try:
        if isinstance(value, bool):
            raise TypeError
        number = index(value)  # type: ignore[arg-type]
    except TypeError:
        number = 0
    if number < 1:
        raise ArgumentError(
            f"{argument}: not a positive whole number ({value!r}); give 1 or more", argument=argument, value=value
        )
    return number


def _half_order(order: object) -> int:
    try:
        if isinstance(order, bool):
            raise TypeError
        number = index(order)  # type: ignore[arg-type]
    except TypeError:
        number = 0
    if number < 2 or number % 2:
        raise ArgumentError(
            f"order: not a positive even number ({order!r}); symmetric formulas have orders 2, 4, 6, …",
            argument="order",
            value=order,
        )
    return number // 2


def _complete_homogeneous(values: Sequence[int], degree: int) -> int:
    """Sum of all monomials of a degree."""
    sums = [1] + [0] * degree
    for value in values:
        for power in range(1, degree + 1):
            sums[power] += value * sums[power - 1]
    return sums[degree]


def _rounded_norm(counts: Sequence[int], half: int) -> float:
    """Σ |a_j| in doubles: sums of positive terms only, so nothing cancels."""
    squares = [k * k for k in counts]
    power = half + len(counts) - 2
    total = 0.0
    for square in squares:
        below = 1.0
        for other in squares:
            if other != square:
                below *= abs(square - other) / square
        total += float(square) ** (power - len(counts) + 1) / below
    return total / _complete_homogeneous(squares, half - 1)


def _sequences(count: int, cost: int, first: int) -> Iterator[tuple[int, ...]]:
    """All ascending sequences of `count` distinct integers from `first` on with a sum of at most `cost`."""
    if count == 0:
        yield ()
        return
    # The rest are at least k + 1, k + 2, …: their sum is (count - 1) k + count (count - 1) / 2.
    last = (cost - count * (count - 1) // 2) // count
    for k in range(first, last + 1):
        for rest in _sequences(count - 1, cost - k, k + 1):
            yield (k, *rest)


def _sequence_count(count: int, cost: int) -> int:
    """How many sequences `_sequences` gives: partitions into distinct parts, counted without making them."""
    room = cost - count * (count + 1) // 2
    # Taking 1, 2, … count away leaves a partition of at most `room` into at most `count` parts.
    ways = [1] + [0] * room
    for part in range(1, count + 1):
        for total in range(part, room + 1):
            ways[total] += ways[total - part]
    return sum(ways)
