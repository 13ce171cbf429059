"""Proved enclosures of the extreme eigenvalues of small and of commuting operators.

Everything here takes coefficients scaled so that the largest is at most 1, and returns outward bounds. u =
2^-53.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Iterable, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn._matrices import diagonals, walsh_hadamard

__all__ = [
    "Scaled",
    "commuting_extremes",
    "dense_extremes",
    "down",
    "is_real",
    "sum_down",
    "sum_up",
    "triangle",
    "up",
]

UNIT_ROUNDOFF = 2.0**-53
SMALLEST = 2.0**-900  # below this, underflow would disturb the error bounds

Scaled = tuple[int, int, float]
"""One term: x mask, z mask, coefficient of at most 1 in size."""


def down(value: float) -> float:
    """Return the double next below."""
    return math.nextafter(value, -math.inf)


def up(value: float) -> float:
    """Return the double next above."""
    return math.nextafter(value, math.inf)


def sum_down(values: Iterable[float]) -> float:
    """Return a lower bound of a sum; fsum rounds once, so one double below is below."""
    return down(math.fsum(values))


def sum_up(values: Iterable[float]) -> float:
    """Return an upper bound of a sum."""
    return up(math.fsum(values))


def triangle(terms: Collection[Scaled]) -> float:
    """Return an upper bound of Σ|c|, which bounds the spectral norm by the triangle inequality."""
    return 0.0 if not terms else sum_up(abs(coefficient) for _, _, coefficient in terms)


def is_real(terms: Iterable[Scaled]) -> bool:
    """Say whether the matrix is real: every string has an even number of Y factors."""
    return all((x & z).bit_count() % 2 == 0 for x, z, _ in terms)


def dense_extremes(terms: Sequence[Scaled], qubits: int) -> tuple[float, float]:
    """Enclose the spectrum of an operator on few qubits by dense algebra.

    Parameters
    ----------
    terms : sequence of (x, z, coefficient)
    qubits : int
        Cost and memory grow as 8**qubits and 4**qubits.

    Returns
    -------
    (low, high) : floats
        Proved. Typically within 4 N**2 u Σ|c|, N = 2**qubits, of the exact extremes.

    Notes
    -----
    The eigenvalue routine only proposes a value; the proof is a Cholesky factorisation of A - s, with s a
    little below. If it runs to its end in floating point with factor R on B = fl(A - s), then B + D = R*
    R is positive semidefinite, with ‖D‖ <= g ‖R‖_F^2 and ‖R‖_F^2 = tr(B + D) <= tr(B) / (1 - g), where g
    = (N + 2) u / (1 - (N + 2) u) for real matrices [1]_ [2]_ and four times that for complex ones, where
    each part of an inner product is a real one of twice the length. Hence A >= s - g tr(B) / (1 - g) - e,
    where e bounds the forming of B: an entry is off by at most max(m, log2 N) u times the sizes of its m
    terms, which add up to Σ|c| over a row, so e is at most max(m, log2 N) u Σ|c| plus one rounding of the
    diagonal, u max|b_ii|. This holds for any order of summation, and so for blocked and threaded
    libraries.

    The last digits of the proposed value depend on library and threads. So that the bound does not, it is
    moved outward to a multiple of 2^-32 of the power of two above Σ|c|; on n < 6 qubits, where fewer digits are
    uncertain, of 2^(2 n - 44).

    References
    ----------
    .. [1] S. M. Rump, Verification of positive definiteness, BIT Numer. Math. 46, 433 (2006).
    .. [2] N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., SIAM (2002), Theorem 10.3.
    """
    size = triangle(terms)
    if size < SMALLEST:
        return -size, size
    matrix = _matrix(terms, qubits)
    proposed = np.linalg.eigvalsh(matrix)
    low = _proved_low(matrix, float(proposed[0]), size, len(terms))
    high = -_proved_low(-matrix, -float(proposed[-1]), size, len(terms))
    grid = 2.0 ** (math.frexp(size)[1] - max(32, 44 - 2 * qubits))
    return max(-size, math.floor(low / grid) * grid), min(size, math.ceil(high / grid) * grid)


def _matrix(terms: Sequence[Scaled], qubits: int) -> npt.NDArray[Any]:
    x_masks, z_masks, coefficients = zip(*terms, strict=True)
    real = is_real(terms)
    matrix = np.zeros((1 << qubits, 1 << qubits), dtype=np.float64 if real else np.complex128)
    columns = np.arange(1 << qubits, dtype=np.int64)
    for x, entries in diagonals(x_masks, z_masks, coefficients, qubits):
        matrix[columns ^ x, columns] = entries.real if real else entries
    return matrix


def _proved_low(matrix: npt.NDArray[Any], proposed: float, size: float, count: int) -> float:
    """A proved lower bound of the spectrum near the proposed one; -size if no proof is found."""
    order = matrix.shape[0]
    growth = (order + 2) * UNIT_ROUNDOFF / (1 - (order + 2) * UNIT_ROUNDOFF)
    if np.iscomplexobj(matrix):
        growth *= 4
    diagonal = np.arange(order)
    for widening in (2.0, 16.0, 1024.0):
        # tr(B) is at most order * 2 * size; a margin of twice the error bound lets the factorisation succeed.
        shift = proposed - widening * growth * order * 2 * size
        shifted = matrix.copy()
        shifted[diagonal, diagonal] -= shift
        trace = sum_up(np.abs(shifted[diagonal, diagonal].real))
        try:
            np.linalg.cholesky(shifted)
        except np.linalg.LinAlgError:
            continue
        largest = float(np.max(np.abs(shifted[diagonal, diagonal].real)))
        factored = growth / (1 - growth) * trace
        formed = UNIT_ROUNDOFF * (max(count, order.bit_length()) * size + largest)
        # Two parts in 2^20 cover the roundings of this very line.
        return down(shift - (factored + formed) * (1 + 2.0**-19))
    return -size


def commuting_extremes(terms: Sequence[Scaled], rank_cap: int) -> tuple[float, float, int] | None:
    """Enclose the spectrum of commuting terms by listing their joint eigenvalues.

    Parameters
    ----------
    terms : sequence of (x, z, coefficient)
        Pairwise commuting.
    rank_cap : int
        Largest number of independent strings to allow.

    Returns
    -------
    (low, high, listed) or None
        The extremes, exact up to rounding, and the number of joint eigenvalues listed: 2^r for rank r, or 0
        when all strings are independent, whose extremes are ±Σ|c|. None when the rank is above the cap.

    Notes
    -----
    Strings that are independent over GF(2), up to sign, have all 2^r joint eigenvalues ±1. The other
    strings are signed products of these, so the operator's value at each joint eigenvalue is a
    Walsh-Hadamard transform of the signed coefficients. Distinct strings have distinct places, and each
    value is a sum in r levels of additions, in error by at most r u Σ|c| to first order; the pad of (r + 1)
    u Σ|c| covers the higher orders.
    """
    size = triangle(terms)
    generators: list[tuple[int, int]] = []
    reduced: dict[int, tuple[int, int]] = {}
    places: list[int] = []
    for x, z, _ in terms:
        vector, combination = x | z << 128, 0
        while vector and (known := reduced.get(vector.bit_length())) is not None:
            vector ^= known[0]
            combination ^= known[1]
        if vector:
            own = 1 << len(generators)
            reduced[vector.bit_length()] = (vector, combination ^ own)
            generators.append((x, z))
            combination = own
        places.append(combination)
    rank = len(generators)
    if rank == len(terms):
        return -size, size, 0
    if rank > rank_cap:
        return None
    values = np.zeros(1 << rank)
    for (x, z, coefficient), place in zip(terms, places, strict=True):
        values[place] = coefficient * _product_sign(generators, place, (x, z))
    walsh_hadamard(values)
    pad = (rank + 1) * UNIT_ROUNDOFF * size
    low, high = down(float(values.min()) - pad), up(float(values.max()) + pad)
    return max(-size, low), min(size, high), 1 << rank


def _product_sign(generators: Sequence[tuple[int, int]], combination: int, string: tuple[int, int]) -> int:
    """The sign s with string = s · (product of the chosen commuting generators)."""
    x = z = turns = 0
    for number, (next_x, next_z) in enumerate(generators):
        if combination >> number & 1:
            # i^{|x&z|} X^x Z^z times the next: moving Z^z past X^x' costs (-1)^{|z & x'|}.
            turns += (next_x & next_z).bit_count() + 2 * (z & next_x).bit_count()
            x ^= next_x
            z ^= next_z
    turns -= (string[0] & string[1]).bit_count()
    return 1 if turns % 4 == 0 else -1
