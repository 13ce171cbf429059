"""Measure the order of a list of stages, by algebra rather than by experiment.

Write a forward stage as F(w) = exp(w Y_1 + w² Y_2 + w³ Y_3 + …), where Y_1 is -iτH and Y_k holds the nested
commutators of k parts; this defines the Y_k for any number of parts. A reverse stage undoes a forward one run
backwards, R(w) = F(-w)⁻¹ = exp(w Y_1 - w² Y_2 + w³ Y_3 - …). The product of all stages is then a series in
the Y_k, taken as letters that do not commute, and the formula has order p exactly if this series agrees with
exp(Y_1) in every word of degree up to p (Y_k counts as degree k).

That this suffices is plain. It is also necessary, for general parts, even two of them: by Lazard elimination
the free Lie algebra over two letters A, B contains the free one over Y_1, Y_2, Y_3, … (dimensions 1, 1, 2, 3,
6, 9, 18, … from degree 1, the same as over A, B from degree 2), so no identity among the Y_k can rescue a
word. A composition of Strang steps needs odd letters only, since Strang is its own adjoint; then a fraction
of the words remains.

The series is computed in integers scaled by 2**200, with the weights as the exact binary fractions they are:
no rounding enters. What remains is that a weight is a rounded number itself. A word therefore counts as
satisfied when moving each weight by at most `WEIGHT_SLACK` (relative to the largest) could remove what is
missing; that allowance comes from the same series with absolute values.

References
----------
R. I. McLachlan, "On the numerical integration of ordinary differential equations by
symmetric composition methods", SIAM J. Sci. Comput. 16, 151 (1995), for stages and their adjoints; C.
Reutenauer, "Free Lie Algebras", Oxford (1993), section 0.3, for elimination. From memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cache, lru_cache

__all__ = ["MOST_ORDER", "WEIGHT_SLACK", "Shortfall", "leading_words", "logarithm_words", "measured_order"]

MOST_ORDER = 12
"""Orders above this are not measured; 2**12 words are followed for a formula without structure."""

WEIGHT_SLACK = 2.0**-45
"""How far a weight may be from the ideal one, over the largest weight: 3e-14.

Rounding to a float alone moves it by 1.1e-16, tables print 15 digits or more, and turning the two lists of a
splitting into stages adds up to some twenty such errors. A weight moved by 1e-3 lies ten orders above this.
"""

_BITS = 200
_ONE = 1 << _BITS
_Word = tuple[int, ...]
_Signed = tuple[Fraction, int]  # weight, and the sign of the even letters: +1 forward, -1 reverse


@dataclass(frozen=True)
class Shortfall:
    """Say which degree fails first, and by how much its worst word misses."""

    degree: int
    residual: float


def measured_order(stages: Sequence[tuple[Fraction, bool]], at_most: int = MOST_ORDER) -> tuple[int, Shortfall | None]:
    """Return the order of a list of stages on general operators.

    Parameters
    ----------
    stages : sequence of (Fraction, bool)
        Weight, and whether the stage is a reverse one.
    at_most : int
        Highest degree to look at, 1 to 12.

    Returns
    -------
    order : int
        The largest p up to `at_most` with all words of degree up to p satisfied; 0 if the weights do not sum
        to 1.
    shortfall : Shortfall or None
        What is missed at degree order + 1; None when nothing is missed up to `at_most`.

    Notes
    -----
    About stages × 6 × 2**degree integer products; with Strang pairs the base falls from 2 to 1.6
    and the number of factors is halved. Degrees are tried in steps, so a low order costs little.
    """
    factors, stride = _factors(stages)
    for degree in [*range(3, at_most, 4), at_most]:
        shortfall = _first_failure(factors, degree, stride)
        if shortfall is not None:
            return shortfall.degree - 1, shortfall
    return at_most, None


def leading_words(stages: Sequence[tuple[Fraction, bool]], degree: int) -> tuple[int, list[tuple[_Word, float]]]:
    """Return by how much each word of one degree differs from exp(Y_1).

    Returns
    -------
    stride : int
        2 where the stages are Strang steps, whose logarithm defines the letters Y_1, Y_3, …; otherwise 1, with
        letters from the logarithm of a forward stage.
    words : list of (tuple of int, float)
        The word, first in time first, and its coefficient less the ideal one.
    """
    factors, stride = _factors(stages)
    found = zip(_words(degree, stride), _product(factors, degree, stride), strict=True)
    return stride, [(word, float(Fraction(value - _ideal(word), _ONE))) for word, value in found if sum(word) == degree]


def logarithm_words(stages: Sequence[tuple[Fraction, bool]], degree: int) -> dict[_Word, float]:
    """Return the logarithm of the product of all stages, word by word.

    Parameters
    ----------
    stages : sequence of (Fraction, bool)
        Weight, and whether the stage is a reverse one.
    degree : int
        Highest degree, at least 1.

    Returns
    -------
    dict of tuple of int to float
        The coefficient of each word in the letters Y_k of a forward stage, first in time first; words whose
        coefficient vanishes (is below 2**-150 in the integer arithmetic) are left out. Together they are a Lie
        series: the coefficients of the Dynkin map applied to them are those of nested commutators.

    Notes
    -----
    log(1 + W) = W - W²/2 + W³/3 - … in the integers of this module, cut after `degree`: about degree × 2**degree
    products for each power of W.
    """
    words, splits = _words(degree, 1), _splits(degree, 1)
    rest = _product(_signed(stages), degree, 1)
    rest[0] = 0
    power, total = rest, [0] * len(words)
    for k in range(1, degree + 1):
        total = [whole - (-1) ** k * term // k for whole, term in zip(total, power, strict=True)]
        power = [sum([power[left] * rest[right] for left, right in pairs]) >> _BITS for pairs in splits]
    return {word: float(Fraction(c, _ONE)) for word, c in zip(words, total, strict=True) if abs(c) > 1 << (_BITS - 150)}


def _signed(stages: Sequence[tuple[Fraction, bool]]) -> tuple[_Signed, ...]:
    return tuple((weight, -1 if reverse else 1) for weight, reverse in stages)


def _factors(stages: Sequence[tuple[Fraction, bool]]) -> tuple[tuple[_Signed, ...], int]:
    """Join Strang pairs where all stages are such pairs; the stride of the letters is then 2."""
    weights = [weight for weight, _ in stages]
    paired = (
        len(stages) % 2 == 0
        and weights[::2] == weights[1::2]
        and all(reverse == bool(number % 2) for number, (_, reverse) in enumerate(stages))
    )
    if paired:
        return tuple((2 * weight, 1) for weight in weights[::2]), 2
    return _signed(stages), 1


def _ideal(word: _Word) -> int:
    return _ONE // math.factorial(len(word)) if all(letter == 1 for letter in word) else 0


@lru_cache(maxsize=64)
def _first_failure(factors: tuple[_Signed, ...], degree: int, stride: int) -> Shortfall | None:
    words = _words(degree, stride)
    slack = Fraction(WEIGHT_SLACK) * max(abs(weight) for weight, _ in factors)
    value = _product(factors, degree, stride)
    low = _product([(abs(weight), 1) for weight, _ in factors], degree, stride)
    high = _product([(abs(weight) + slack, 1) for weight, _ in factors], degree, stride)
    worst: dict[int, int] = {}
    for word, found, below, above in zip(words, value, low, high, strict=True):
        missing = abs(found - _ideal(word))
        if missing > above - below + (1 << (_BITS // 2)):  # the last term: roundings of the integer products
            worst[sum(word)] = max(worst.get(sum(word), 0), missing)
    if not worst:
        return None
    first = min(worst)
    return Shortfall(first, float(Fraction(worst[first], _ONE)))


def _product(factors: Sequence[_Signed], degree: int, stride: int) -> list[int]:
    """Coefficients, times 2**200, of the product of the stages' exponentials, word by word.

    A fractal formula repeats a few blocks over and over, so blocks are multiplied out once.
    """
    splits = _splits(degree, stride)
    known: dict[tuple[_Signed, ...], list[int]] = {
        (factor,): _exponential(*factor, degree, stride) for factor in set(factors)
    }

    def product(block: tuple[_Signed, ...]) -> list[int]:
        if block not in known:
            pieces = next((count for count in (5, 3, 2) if len(block) % count == 0), len(block))
            size = len(block) // pieces
            total = product(block[:size])
            for start in range(size, len(block), size):
                factor = product(block[start : start + size])
                total = [sum([total[left] * factor[right] for left, right in pairs]) >> _BITS for pairs in splits]
            known[block] = total
        return known[block]

    return product(tuple(factors))


def _exponential(weight: Fraction, even_sign: int, degree: int, stride: int) -> list[int]:
    """Coefficients, times 2**200, of one stage: w**degree / length! for each word, and the sign."""
    powers = [_ONE * weight.numerator**d // weight.denominator**d for d in range(degree + 1)]
    return [
        powers[sum(word)] // math.factorial(len(word)) * even_sign ** sum(letter % 2 == 0 for letter in word)
        for word in _words(degree, stride)
    ]


@cache
def _words(degree: int, stride: int) -> list[_Word]:
    """All words of letters 1, 1 + stride, … up to a degree, by degree."""
    by_degree: list[list[_Word]] = [[()]]
    for total in range(1, degree + 1):
        by_degree.append([(*word, k) for k in range(1, total + 1, stride) for word in by_degree[total - k]])
    return [word for words in by_degree for word in words]


@cache
def _splits(degree: int, stride: int) -> list[list[tuple[int, int]]]:
    """For each word, the numbers of every prefix and of the suffix that completes it."""
    words = _words(degree, stride)
    number = {word: place for place, word in enumerate(words)}
    return [[(number[word[:cut]], number[word[cut:]]) for cut in range(len(word) + 1)] for word in words]
