"""The leading error of a formula, on general operators and at equal cost.

Fix three parts A_1, A_2, A_3: Hermitian matrices of dimension 16 with entries drawn once from a fixed seed,
each scaled to spectral norm 1, so that no commutator of them vanishes or repeats another. With H their sum,
one step of a formula S of order p errs by

    ‖S(τ) - exp(-iτH)‖ = C τ^(p+1) + O(τ^(p+2)),

which defines its error coefficient C. A circuit for unit time with N exponentials of parts takes r = N/k steps
of k exponentials each (neighbours that merge, seams between steps included, count once) and errs to leading
order by at most r C (1/r)^(p+1), that is

    error ≤ (L / N)^p,    L = k C^(1/p).

L is the measure used to compare formulas: dividing a step in two, or writing a formula down twice, leaves it
as it is. To reach an error ε in unit time takes N = L ε^(-1/p).

C is not fitted. The leading term is a sum over words of degree p + 1 in the letters Y_k of
`trueturn.formulas.order`, whose coefficients come from the same exact series; the Y_k of the three parts are
matrices found once by the logarithm of a power series. What is left is rounding of a few hundred products of
16 x 16 matrices. The value depends on the draw: over four other draws L moved by up to 30 per cent, mostly by a
common factor, and ratios within one order by up to ten per cent. Formulas nearer than that are not told apart.
"""

from __future__ import annotations

import random
from collections.abc import Sequence
from fractions import Fraction
from functools import cache

import numpy as np
import numpy.typing as npt

from trueturn.formulas.merging import merged_runs
from trueturn.formulas.order import leading_words

__all__ = ["PARTS", "error_coefficient", "exponentials_per_step", "sample_parts"]

PARTS = 3
DIMENSION = 16
SEED = 20

_Matrix = npt.NDArray[np.complex128]


def exponentials_per_step(stages: Sequence[tuple[Fraction, bool]]) -> int:
    """Count the exponentials that one more step adds to a long circuit of three parts."""
    runs = merged_runs(stages, PARTS)
    return len(runs) - (len(runs) > 1 and runs[0][0] == runs[-1][0])


def error_coefficient(stages: Sequence[tuple[Fraction, bool]], order: int) -> float:
    """Compute the C of the leading error of one step; see the module."""
    stride, words = leading_words(stages, order + 1)
    letters = _letters(order + 1, stride)
    products: dict[tuple[int, ...], _Matrix] = {(): np.eye(DIMENSION, dtype=np.complex128)}

    def product(word: tuple[int, ...]) -> _Matrix:
        if word not in products:
            products[word] = letters[word[-1]] @ product(word[:-1])  # words are in time order
        return products[word]

    total = np.zeros((DIMENSION, DIMENSION), dtype=np.complex128)
    for word, missing in words:
        total += missing * product(word)
    return float(np.linalg.norm(total, 2))


def sample_parts(seed: int = SEED) -> list[_Matrix]:
    """Draw the three parts: real and imaginary entries uniform in [-1, 1], made Hermitian, of norm 1."""
    # Python's own generator: its `random()` is guaranteed to stay the same for a seed, NumPy's streams are not.
    draw = random.Random(seed)
    parts = []
    for _ in range(PARTS):
        entries = [complex(2 * draw.random() - 1, 2 * draw.random() - 1) for _ in range(DIMENSION**2)]
        square = np.array(entries).reshape(DIMENSION, DIMENSION)
        hermitian = square + square.conj().T
        parts.append(hermitian / np.linalg.norm(hermitian, 2))
    return parts


@cache
def _letters(degree: int, stride: int) -> list[_Matrix]:
    """Matrices Y_0 = 0, Y_1, … up to a degree: the logarithm of one forward stage, or of one Strang step."""
    generators = [-1j * part for part in sample_parts()]
    if stride == 2:
        generators = [half / 2 for half in generators + generators[::-1]]
    series = _one(degree)
    for generator in generators:
        exponential = _one(degree)
        for k in range(1, degree + 1):
            exponential[k] = exponential[k - 1] @ generator / k
        series = _times(exponential, series, degree)  # later in time stands to the left
    rest = [np.zeros_like(series[0]), *series[1:]]
    logarithm = [np.zeros_like(series[0]) for _ in series]
    power = _one(degree)
    for k in range(1, degree + 1):
        power = _times(power, rest, degree)
        logarithm = [sum_ + (-1) ** (k + 1) / k * term for sum_, term in zip(logarithm, power, strict=True)]
    return logarithm


def _one(degree: int) -> list[_Matrix]:
    zero = np.zeros((DIMENSION, DIMENSION), dtype=np.complex128)
    return [np.eye(DIMENSION, dtype=np.complex128), *[zero] * degree]


def _times(left: list[_Matrix], right: list[_Matrix], degree: int) -> list[_Matrix]:
    return [
        sum((left[k] @ right[total - k] for k in range(total + 1)), np.zeros_like(left[0]))
        for total in range(degree + 1)
    ]
