"""One figure of an averaged channel, with an interval that holds for any number of samples.

The samples' values are independent and lie in a known range of length R, an expectation of O in 2‖O‖. With n of them,
standard deviation s (n - 1 in the denominator) and L = ln(5/δ), their mean is off from that of the averaged channel by
at most the least of

- s √(2L/n) + 7RL / (3(n - 1)), the empirical Bernstein bound of [1]_,
- R √(L/(2n)), that of Hoeffding [2]_,
- R,

except with probability δ = 1 - `CONFIDENCE`. The first needs three events, the mean on either side and s, the second the
mean on either side: five of probability δ/5 each. [1]_ states one side, with two events and so ln(2/δ). No distribution
is assumed, unlike in multiples of the standard error, which few samples or rare ones make far too short.

References
----------
.. [1] A. Maurer, M. Pontil, Empirical Bernstein bounds and sample variance penalization, COLT 2009, theorem 4; from
   memory.
.. [2] W. Hoeffding, J. Am. Stat. Assoc. 58, 13 (1963), theorem 2; from memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["CONFIDENCE", "Estimate", "estimated", "sampling_width"]

CONFIDENCE = 0.997
"""Probability, at least, with which the sampling part of one error interval holds."""


@dataclass(frozen=True)
class Estimate:
    """One figure of the averaged channel.

    Attributes
    ----------
    mean : float
        Over the samples.
    standard_error : float
        Of the mean: spread / √count; infinite for one sample.
    spread : float
        Standard deviation of single samples, with count - 1 in the denominator; infinite for one sample.
    exact : float or None
        The reference's value.
    error : (float, float) or None
        Interval for how far the averaged channel is from `exact`: measured ∓ (sampling + reference bound + rounding),
        clipped at 0. The sampling part holds with a probability of at least 99.7 % for any count and any distribution,
        see `trueturn.randomised.estimates`: a confidence statement on this one interval, not a proof. It is at most the
        range of the figure, which is what few samples give.
    bound : float or None
        Proven bound on the same error of the averaged channel: ‖O‖ · ‖E - U‖_⋄ for an observable (identity
        removed, no factor 1/2), (1/2)‖E - U‖_⋄ for an infidelity. Not a bound on any sample.
    """

    mean: float
    standard_error: float
    spread: float
    exact: float | None
    error: tuple[float, float] | None
    bound: float | None


def sampling_width(count: int, spread: float, reach: float) -> float:
    """Return how far the mean of `count` values within a range of length `reach` is off, see the module."""
    log = math.log(5.0 / (1.0 - CONFIDENCE))
    width = min(reach, reach * math.sqrt(log / (2.0 * count)))
    if count > 1:
        width = min(width, spread * math.sqrt(2.0 * log / count) + 7.0 * reach * log / (3.0 * (count - 1)))
    return width


def estimated(
    values: npt.NDArray[np.float64], reach: float, exact: float | None, slack: float, bound: float | None
) -> Estimate:
    """Make an estimate from values in a range of length `reach`, each off by at most `slack` with `exact`.

    Sums are exactly rounded, so that the order of the samples does not matter.
    """
    count = len(values)
    mean = math.fsum(values) / count
    spread = math.sqrt(math.fsum((values - mean) ** 2) / (count - 1)) if count > 1 else math.inf
    error = None
    if exact is not None:
        # Rounding widens the range on both sides.
        measured, width = abs(mean - exact), sampling_width(count, spread, reach + 2.0 * slack) + slack
        error = (max(0.0, measured - width), measured + width)
    return Estimate(mean, spread / math.sqrt(count), spread, exact, error, bound)
