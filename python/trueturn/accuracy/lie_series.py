"""Series of nested brackets over the Pauli algebra: the logarithm of products of exponentials.

A product exp(-iτA) followed by exp(-iτB) is exp(-iZ(τ)) with Z = τ Z_1 + τ² Z_2 + …, each Z_k Hermitian. Written in
time order (first factor first), the commutator of two words a, b is ab - ba, and under a = -iA, b = -iB it becomes
-i times the Hermitian operator

    {A, B} = i[A, B] = A.bracket(B),

so that a Lie series in words is the same series in Hermitian operators with {·,·} for the commutator. Three facts do
the rest.

1. The logarithm of a product of exponentials, computed word by word, is a Lie series (Friedrichs; Reutenauer [1]_).
2. Let D_a send a word a b c … that begins with the letter a to the nested commutator {…{{a, b}, c}, …}, and all other
   words to zero. D_a is a derivation of the free Lie algebra with D_a(a) = a and D_a(b) = 0 for other letters (the
   proof for Dynkin's map, restricted to one innermost letter: for Lie polynomials P and Q the right factor acts by
   nested commutators, so D_a(PQ - QP) = {D_a P, Q} - {D_a Q, P}). Hence D_a(P) = (number of a in each word) · P for a
   Lie polynomial P of one multidegree, and P is written in nested commutators that all start with a. Choosing the
   rarest letter leaves few of them.
3. With operators that are themselves series in τ, a bracket is a convolution by degree, cut at the degree wanted.

Nothing is said of convergence: these are series cut after a degree.

References
----------
.. [1] C. Reutenauer, Free Lie Algebras, Oxford (1993), sections 1.3 and 1.4; from memory.
.. [2] E. B. Dynkin, Dokl. Akad. Nauk SSSR 57, 323 (1947); from memory.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from functools import cache
from math import factorial

import numpy as np

from trueturn import _memory
from trueturn.operator import Operator

__all__ = ["Series", "logarithm_of_exponentials", "logarithm_of_letters"]

Series = dict[int, Operator]
"""Hermitian operators by degree in τ, from 1 on; degrees whose operator is zero are absent."""

_Word = tuple[int, ...]


def logarithm_of_exponentials(generators: Sequence[Operator], degree: int) -> Series:
    """Return Z with exp(-iτA_m) … exp(-iτA_1) = exp(-iZ(τ)), A_1 acting first.

    Parameters
    ----------
    generators : sequence of Operator
        In time order; at least one.
    degree : int
        Highest power of τ that is kept.

    Notes
    -----
    Neighbours are joined two and two, so that local operators stay local for as long as possible. Joining two series
    takes 2**(degree - 1) - 1 nested brackets, each a convolution by degree.
    """
    algebra = _Algebra(degree)
    layer: list[Series] = [{1: generator} for generator in generators]
    while len(layer) > 1:
        pairs = [algebra.joined(layer[k], layer[k + 1]) for k in range(0, len(layer) - 1, 2)]
        layer = pairs + layer[len(layer) - len(layer) % 2 :]
    return layer[0]


def logarithm_of_letters(letters: Series, coefficients: Mapping[_Word, float], degree: int) -> Series:
    """Evaluate a Lie series in letters Y_k of degree k.

    Parameters
    ----------
    letters : Series
    coefficients : mapping of tuple of int to float
        Coefficients of all words of a Lie series, first in time first.
    degree : int
        Highest degree that is kept.

    Notes
    -----
    The innermost letter of every nested bracket is the highest of its multidegree, which mostly occurs once.
    """
    algebra = _Algebra(degree)
    known: dict[_Word, Operator | None] = {(k,): letters.get(k) for k in range(1, degree + 1)}

    def nested(word: _Word) -> Operator | None:
        if word not in known:
            known[word] = algebra.bracket(nested(word[:-1]), known[word[-1:]])
        return known[word]

    sums: dict[int, list[tuple[float, Operator]]] = {}
    for word, coefficient in coefficients.items():
        total, first = sum(word), max(word)
        if total > degree or word[0] != first:
            continue
        operator = nested(word)
        if operator is not None:
            sums.setdefault(total, []).append((coefficient / word.count(first), operator))
    return {total: found for total in sorted(sums) if len(found := _combined(sums[total]))}


class _Algebra:
    """Brackets of operators and of series up to a degree."""

    def __init__(self, degree: int) -> None:
        self._degree = degree
        self._memory = _memory.allowed_bytes()  # asked once: a series takes thousands of small brackets

    def bracket(self, left: Operator | None, right: Operator | None) -> Operator | None:
        if left is None or right is None:
            return None
        found = Operator._of(left._terms.bracket(right._terms, self._memory))
        return found if len(found) else None

    def convolved(self, left: Series, right: Series) -> Series:
        sums: dict[int, list[tuple[float, Operator]]] = {}
        for i, first in left.items():
            for j, second in right.items():
                if i + j <= self._degree:
                    found = self.bracket(first, second)
                    if found is not None:
                        sums.setdefault(i + j, []).append((1.0, found))
        return {k: found for k in sorted(sums) if len(found := _combined(sums[k]))}

    def joined(self, first: Series, second: Series) -> Series:
        """Return the logarithm of exp(first) followed by exp(second)."""
        coefficients = _two_letter_logarithm(self._degree)
        sums: dict[int, list[tuple[float, Operator]]] = {}

        def add(weight: float, series: Series) -> None:
            for k, operator in series.items():
                sums.setdefault(k, []).append((weight, operator))

        def descend(word: _Word, series: Series) -> None:
            """Add {…{first, second}, …} for `word` and all longer words that begin with it."""
            if not series:
                return
            weight = coefficients.get(word, 0.0)
            if weight:
                add(weight / word.count(0), series)
            if min(series) < self._degree:
                descend((*word, 0), self.convolved(series, first))
                descend((*word, 1), self.convolved(series, second))

        add(1.0, first)
        add(1.0, second)
        descend((0, 1), self.convolved(first, second))
        return {k: found for k in sorted(sums) if len(found := _combined(sums[k]))}


@cache
def _two_letter_logarithm(degree: int) -> dict[_Word, float]:
    """Coefficients of log(exp(x) exp(y)) in words of 0 for x and 1 for y; exact, then rounded once."""
    rest = {
        (0,) * a + (1,) * b: Fraction(1, factorial(a) * factorial(b))
        for a in range(degree + 1)
        for b in range(degree + 1 - a)
        if a + b
    }
    power, total = dict(rest), dict[_Word, Fraction]()
    for k in range(1, degree + 1):
        for word, value in power.items():
            total[word] = total.get(word, Fraction(0)) - (-1) ** k * value / k
        grown: dict[_Word, Fraction] = {}
        for left, value in power.items():
            for right, other in rest.items():
                if len(left) + len(right) <= degree:
                    grown[left + right] = grown.get(left + right, Fraction(0)) + value * other
        power = grown
    return {word: float(value) for word, value in total.items() if value}


def _combined(pairs: Sequence[tuple[float, Operator]]) -> Operator:
    """Return Σ weight · operator, equal strings merged in one go."""
    if len(pairs) == 1 and pairs[0][0] == 1.0:
        return pairs[0][1]
    x = np.concatenate([operator.x_masks for _, operator in pairs])
    z = np.concatenate([operator.z_masks for _, operator in pairs])
    values = np.concatenate([weight * operator.coefficients for weight, operator in pairs])
    return Operator.from_masks(x, z, values, max(operator.qubits for _, operator in pairs))
