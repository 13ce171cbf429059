"""Order conditions of a list of stages: few, independent, with derivatives, in doubles or in decimals.

A stage is exp(w Y_1 + w² Y_2 + …) or its adjoint, see `trueturn.formulas.order`. The product of stages is
group-like, so its coefficients at the Lyndon words fix all others (Radford 1979): order p means the coefficient
1 at the word Y_1 and 0 at every other Lyndon word of degree up to p. Of a symmetric list only the odd degrees
are needed, since the logarithm of a symmetric product has no even ones. That leaves 2, 4, 8, 16 conditions for
orders 4, 6, 8, 10 where the stages are Strang pairs, and 3, 9, 27 where they alternate freely.

References
----------
D. E. Radford, "A natural ring basis for the shuffle algebra and an application to group schemes", J. Algebra
58, 432 (1979); A. Murua and J. M. Sanz-Serna, "Order conditions for numerical integrators obtained by composing
simpler integrators", Phil. Trans. R. Soc. A 357, 1079 (1999), for the counts. From memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal
from functools import cache
from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["Conditions", "lyndon_words"]

Word = tuple[int, ...]
Array = npt.NDArray[np.float64]


@cache
def lyndon_words(degree: int, stride: int) -> tuple[Word, ...]:
    """List the Lyndon words of one degree in the letters 1, 1 + stride, … (letter k has degree k).

    Returns
    -------
    tuple of words
        In increasing lexicographic order: words smaller than each of their proper suffixes.
    """

    def words(total: int) -> list[Word]:
        if total == 0:
            return [()]
        return [(k, *rest) for k in range(1, total + 1, stride) for rest in words(total - k)]

    return tuple(sorted(word for word in words(degree) if all(word < word[cut:] for cut in range(1, len(word)))))


class Conditions:
    """Coefficients of a product of stages at chosen Lyndon words.

    Parameters
    ----------
    degrees : sequence of int
        All Lyndon words of these degrees, in this order.
    stride : {1, 2}
        2 for Strang pairs, whose logarithms have odd letters only; 1 for single stages.

    Notes
    -----
    A row vector of coefficients, one for each word and each prefix of one, is multiplied by one matrix for each
    stage; that matrix is a polynomial in the weight. A product of n stages costs n small matrix products, its
    derivatives as many again.
    """

    def __init__(self, degrees: Sequence[int], stride: int) -> None:
        self.words = tuple(word for degree in degrees for word in lyndon_words(degree, stride))
        closed = sorted({word[:cut] for word in self.words for cut in range(len(word) + 1)}, key=lambda w: (sum(w), w))
        self._closed = tuple(closed)
        place = {word: number for number, word in enumerate(closed)}
        self._cuts = [
            [(place[word[:cut]], sum(word[cut:]), len(word) - cut, _evens(word[cut:])) for cut in range(len(word) + 1)]
            for word in closed
        ]
        self._chosen = np.array([place[word] for word in self.words], dtype=np.intp)
        self._ideal = np.array([1.0 if word == (1,) else 0.0 for word in self.words])
        self._top = max(sum(word) for word in closed)
        self._maps = np.zeros((2, self._top + 1, len(closed), len(closed)))
        for number, cuts in enumerate(self._cuts):
            for prefix, power, length, evens in cuts:
                share = 1 / math.factorial(length)
                self._maps[0, power, prefix, number] = share
                self._maps[1, power, prefix, number] = share * (-1) ** evens

    def values(self, weights: Array, signs: Sequence[int]) -> tuple[Array, Array]:
        """Return what each condition misses, and the derivatives.

        Parameters
        ----------
        weights : ndarray, shape (n,)
        signs : sequence of n of +1, -1
            +1 for a forward stage or a Strang pair, -1 for a reverse stage.

        Returns
        -------
        residual : ndarray, shape (len(words),)
        jacobian : ndarray, shape (len(words), n)
        """
        size = len(self._closed)
        powers = weights[:, None] ** np.arange(self._top + 1)
        slopes = np.zeros_like(powers)
        slopes[:, 1:] = powers[:, :-1] * np.arange(1, self._top + 1)
        row = np.zeros(size)
        row[0] = 1.0
        moved = np.zeros((len(weights), size))
        flat = self._maps.reshape(2, self._top + 1, -1)
        for number, sign in enumerate(signs):
            table = flat[0 if sign > 0 else 1]
            stage = (powers[number] @ table).reshape(size, size)
            moved[:number] = moved[:number] @ stage
            moved[number] = row @ (slopes[number] @ table).reshape(size, size)
            row = row @ stage
        return row[self._chosen] - self._ideal, moved[:, self._chosen].T

    def exact(self, weights: Sequence[Any], signs: Sequence[int]) -> list[Any]:
        """Return what each condition misses, in the arithmetic of the weights (Decimal, in the current context)."""
        zero, one = Decimal(0), Decimal(1)
        row = [one, *[zero] * (len(self._closed) - 1)]
        for weight, sign in zip(weights, signs, strict=True):
            powers = [one]
            for _ in range(self._top):
                powers.append(powers[-1] * weight)
            now = []
            for cuts in self._cuts:
                terms = (
                    row[prefix] * powers[power] / math.factorial(length) * (sign if evens % 2 else 1)
                    for prefix, power, length, evens in cuts
                )
                now.append(sum(terms, zero))
            row = now
        return [
            row[place] - (one if word == (1,) else zero) for place, word in zip(self._chosen, self.words, strict=True)
        ]


def _evens(word: Word) -> int:
    return sum(letter % 2 == 0 for letter in word)
