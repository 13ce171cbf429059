"""The leading error of a formula on general operators, as one number.

A formula of order p gives exp(-iτH) times 1 + τ^{p+1} E + …, and E is a sum of nested commutators of the parts.
Written out in words of the parts, E has one coefficient for each word; the number used here is the Euclidean
norm of those coefficients for two parts. It depends on no choice of a basis of commutators, and it is the
normalised Frobenius norm of E when the parts are replaced by free circular elements (large independent complex
Gaussian matrices of unit variance), for which distinct words are orthogonal (Voiculescu).

References
----------
D. V. Voiculescu, K. J. Dykema, A. Nica, "Free Random Variables", AMS (1992); C. Reutenauer, "Free Lie
Algebras", Oxford (1993), section 5.1, for the Lyndon basis. From memory.
"""

from __future__ import annotations

import itertools
import math
from functools import cache

import numpy as np
import numpy.typing as npt

from trueturn.formulas.conditions import Word, lyndon_words

__all__ = ["PARTS", "error_root"]

PARTS = 2
"""How many parts the leading error is written out in."""

Series = dict[Word, float]


@cache
def error_root(degree: int, stride: int) -> npt.NDArray[np.float64]:
    """Return the matrix R with ‖E‖ = ‖R e‖ for the coefficients e of E at the Lyndon words of its degree.

    Parameters
    ----------
    degree : int
        p + 1.
    stride : {1, 2}
        As in `trueturn.formulas.conditions`.

    Returns
    -------
    ndarray, shape (k, k), upper triangular, k the number of Lyndon words
    """
    words = lyndon_words(degree, stride)
    brackets = [_bracketed(word) for word in words]
    corner = np.array([[poly.get(word, 0.0) for poly in brackets] for word in words])
    letters = _letters(degree, stride)
    places = {word: row for row, word in enumerate(itertools.product(range(PARTS), repeat=degree))}
    columns = np.zeros((len(places), len(words)))
    for number, poly in enumerate(brackets):
        for word, factor in poly.items():
            written: Series = {(): factor}
            for letter in word:
                written = _times(written, letters[letter], degree)
            for text, value in written.items():
                columns[places[text], number] += value
    _, root = np.linalg.qr(columns @ np.linalg.inv(corner))
    return np.asarray(root, dtype=np.float64)


@cache
def _bracketed(word: Word) -> Series:
    """Standard bracketing of a Lyndon word: the longest proper Lyndon suffix on the right."""
    if len(word) == 1:
        return {word: 1.0}
    cut = next(cut for cut in range(1, len(word)) if all(word[cut:] < word[k:] for k in range(cut + 1, len(word))))
    left, right = _bracketed(word[:cut]), _bracketed(word[cut:])
    total = _times(left, right, sum(word))
    for text, value in _times(right, left, sum(word)).items():
        total[text] = total.get(text, 0.0) - value
    return total


@cache
def _letters(degree: int, stride: int) -> list[Series]:
    """Y_0 = nothing, Y_1, Y_2, … in words of the parts, degree by degree.

    They are the logarithm of one forward stage exp(A_1) exp(A_2) …, or of one Strang step where `stride` is 2.
    """
    forward = [(part, 1.0 / stride) for part in range(PARTS)]
    product: Series = {(): 1.0}
    for part, weight in forward if stride == 1 else [*forward, *reversed(forward)]:
        exponential = {(part,) * size: weight**size / math.factorial(size) for size in range(degree + 1)}
        product = _times(product, exponential, degree)
    less_one = {word: value for word, value in product.items() if word}
    found: list[Series] = [{} for _ in range(degree + 1)]
    power: Series = {(): 1.0}
    for count in range(1, degree + 1):
        power = _times(power, less_one, degree)
        for word, value in power.items():
            entry = found[len(word)]
            entry[word] = entry.get(word, 0.0) + (-1) ** (count + 1) * value / count
    return found


def _times(left: Series, right: Series, degree: int) -> Series:
    total: Series = {}
    for first, one in left.items():
        for second, other in right.items():
            if len(first) + len(second) <= degree:
                total[first + second] = total.get(first + second, 0.0) + one * other
    return total
