"""Sums of products of fermion operators, as Pauli strings by the Jordan-Wigner transformation.

Mode j sits on qubit j and a_j = Z_0 … Z_{j-1} (X_j + i Y_j)/2, so |1> is filled. With real integrals every Hamiltonian of
electrons is a combination of the Hermitian *pair operators*

    T_ij = a†_i a_j + a†_j a_i = (X_i Z…Z X_j + Y_i Z…Z Y_j)/2   for i < j,      T_ii = a†_i a_i = (1 - Z_i)/2,

and of their products. A pair operator has two strings, a product of two has four; where two strings anticommute, their
product drops out of T_A T_B + T_B T_A. So everything is done on arrays of masks, without a loop over terms.

P. Jordan, E. Wigner, Z. Phys. 47, 631 (1928). From memory; the algebra is checked in the tests against matrices.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn.chemistry import _masks
from trueturn.chemistry._masks import Words

__all__ = ["PairStrings", "StringSum", "add_pair_products", "add_pairs", "pair_strings"]

Reals = npt.NDArray[np.float64]

# Strings held before equal ones are added up: some 100 MB of masks and coefficients.
_PENDING = 1 << 21
_UNIT = 2.0**-53


@dataclass(frozen=True)
class PairStrings:
    """The two strings of each pair operator: masks of shape (pairs, 2, words), coefficients of shape (pairs, 2)."""

    x: Words
    z: Words
    coefficients: Reals


@dataclass
class StringSum:
    """A growing sum of strings on `modes` qubits, in which equal ones are added up now and then."""

    modes: int
    _pending: list[tuple[Words, Words, Reals, Reals, Reals]] = field(default_factory=list)
    _held: int = 0

    def add(self, x: Words, z: Words, coefficients: Reals) -> None:
        """Add strings: masks of shape (m, words), coefficients of shape (m,)."""
        self._pending.append((x, z, coefficients, np.abs(coefficients), np.ones_like(coefficients)))
        self._held += coefficients.size
        if self._held > _PENDING:
            self._merge()

    def _merge(self) -> None:
        if not self._pending:
            empty = np.zeros((0, _masks.word_count(self.modes)), dtype=np.uint64)
            nothing = np.zeros(0)
            self._pending = [(empty, empty, nothing, nothing, nothing)]
            return
        x, z, coefficients, sizes, times = (np.concatenate(column) for column in zip(*self._pending, strict=True))
        keys = [mask[:, place] for mask in (z, x) for place in range(mask.shape[1])]
        order = np.lexsort(keys)
        x, z = x[order], z[order]
        fresh = np.ones(len(order), dtype=bool)
        fresh[1:] = (x[1:] != x[:-1]).any(axis=1) | (z[1:] != z[:-1]).any(axis=1)
        starts = np.flatnonzero(fresh)
        sums = (
            [np.add.reduceat(column[order], starts) for column in (coefficients, sizes, times)] if len(starts) else []
        )
        self._pending = [(x[starts], z[starts], *(sums or [coefficients, sizes, times]))]  # type: ignore[list-item]
        # Distinct strings stay for good: only what comes on top counts towards the next time.
        self._held = 0

    def strings(self) -> tuple[Words, Words, Reals]:
        """Return the distinct strings in the order of their masks, x before z, so diagonal ones first.

        A sum of m coefficients c that is at most m u Σ|c|, u = 2^-53, is what rounding can leave of an exact zero, and is
        dropped.
        """
        self._merge()
        x, z, coefficients, sizes, times = self._pending[0]
        kept = np.abs(coefficients) > np.where(times > 1.0, times * _UNIT * sizes, 0.0)
        return x[kept], z[kept], coefficients[kept]


def pair_strings(first: npt.NDArray[Any], second: npt.NDArray[Any], modes: int) -> PairStrings:
    """Return the strings of T_ij for pairs of modes.

    Parameters
    ----------
    first, second : ndarray of int, shape (pairs,)
        Modes i and j, in either order; equal ones give the number operator.
    modes : int
    """
    low, high = np.minimum(first, second), np.maximum(first, second)
    places = np.arange(modes)
    ends = (places == low[:, None]) | (places == high[:, None])
    between = (places > low[:, None]) & (places < high[:, None])
    apart = (low < high)[:, None]
    # i < j: X…X then Y…Y, each with Z between; i = j: the identity, then Z.
    x = np.stack([ends & apart, ends & apart], axis=1)
    z = np.stack([between, between | ends], axis=1)
    coefficients = np.where(apart, [[0.5, 0.5]], [[0.5, -0.5]])
    return PairStrings(_masks.from_bits(x), _masks.from_bits(z), coefficients)


def add_pairs(total: StringSum, pairs: PairStrings, strengths: Reals) -> None:
    """Add Σ_A strengths[A] T_A."""
    used = np.flatnonzero(strengths)
    words = pairs.x.shape[-1]
    weights = strengths[used, None] * pairs.coefficients[used]
    total.add(pairs.x[used].reshape(-1, words), pairs.z[used].reshape(-1, words), weights.ravel())


def add_pair_products(total: StringSum, pairs: PairStrings, strengths: Reals) -> None:
    """Add ½ Σ_{A,B} strengths[A, B] T_A T_B for a symmetric matrix of strengths.

    Notes
    -----
    A ≠ B enters twice, so with its strings as strengths · c_a c_b · ½(P_a P_b + P_b P_a): P_a P_b where they commute, else
    nothing. A = B enters once, with half of that.
    """
    ys = _masks.counts(pairs.x & pairs.z)
    for place in range(len(strengths)):
        row = strengths[place, place:].copy()
        row[0] *= 0.5
        used = np.flatnonzero(row)
        others = used + place
        if not used.size:
            continue
        x, z = pairs.x[others], pairs.z[others]
        for one in (0, 1):
            own_x, own_z = pairs.x[place, one], pairs.z[place, one]
            # P(x, z) = i^|x∧z| X^x Z^z, so P_a P_b = i^(y_a + y_b - y_ab + 2 |z_a ∧ x_b|) P_ab, real where they commute.
            new_x, new_z = x ^ own_x, z ^ own_z
            power = ys[place, one] + ys[others] - _masks.counts(new_x & new_z) + 2 * _masks.counts(own_z & x)
            weights = row[used, None] * pairs.coefficients[place, one] * pairs.coefficients[others]
            weights = np.where(power % 4 == 2, -weights, weights)
            real = power % 2 == 0
            total.add(new_x[real], new_z[real], weights[real])
