"""Proven bounds on the averaged channel of a randomised formula.

Two normalisations are in use, and they differ by a factor of 2. The diamond norm of a difference of channels is
at most 2; half of it, at most 1, is the largest trace distance between their outputs. `ChannelBound` carries
both under names that say which is which.

No bound here says anything about one sample. A sample of qDRIFT is typically off by the square root of what the
average is off by.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from trueturn.errors import ArgumentError
from trueturn.randomised.checks import finite, whole

__all__ = [
    "ChannelBound",
    "least_qdrift_draws",
    "qdrift_bound",
    "random_direction_bound",
]

CAMPBELL = "E. Campbell, Random compiler for fast Hamiltonian simulation, Phys. Rev. Lett. 123, 070503 (2019)"
CHILDS = "A. M. Childs, A. Ostrander, Y. Su, Faster quantum simulation by randomization, Quantum 3, 182 (2019)"
TRIVIAL = "no two channels are further apart"

# Each value takes some twenty operations of one rounding each, exponentials included.
ROUNDING = 1.0 + 1e-14


@dataclass(frozen=True)
class ChannelBound:
    """A proven upper bound on the distance of an averaged channel from exp(-iHt); not on that of any one sample.

    Attributes
    ----------
    half_diamond : float
        Bounds (1/2)‖E - U‖_⋄, the largest trace distance between outputs; at most 1.
    theorem : str
        Which statement of the source.
    source : str
    kind : str
        ``"proven"``.
    """

    half_diamond: float
    theorem: str
    source: str
    kind: str = "proven"

    @property
    def diamond(self) -> float:
        """Bound on ‖E - U‖_⋄ without the factor 1/2; at most 2."""
        return 2.0 * self.half_diamond

    def __str__(self) -> str:
        return (
            f"averaged channel (not one sample): half diamond norm ≤ {self.half_diamond:.3g}, "
            f"diamond norm ≤ {self.diamond:.3g} ({self.theorem})"
        )


def qdrift_bound(one_norm: float, time: float, draws: int) -> ChannelBound:
    """Bound the channel of qDRIFT: (1/2)‖E - U‖_⋄ ≤ (2 λ² t² / N) exp(2 λ |t| / N).

    Parameters
    ----------
    one_norm : float
        λ = Σ|c| without the identity.
    time : float
    draws : int
        N, at least 1.

    Returns
    -------
    ChannelBound

    Raises
    ------
    ArgumentError
        `one_norm` is negative, a number is not finite, or `draws` not a whole number from 1.

    Notes
    -----
    In the diamond norm without the 1/2 the bound doubles.

    References
    ----------
    .. [1] E. Campbell, Phys. Rev. Lett. 123, 070503 (2019), the bound before its simplification to
       2 λ² t² / ε; from memory, and follows from `drift_step`.

    Examples
    --------
    >>> round(qdrift_bound(one_norm=1.0, time=1.0, draws=100).half_diamond, 6)
    0.020404
    """
    strength = _strength(one_norm) * abs(finite("time", time, "give a real number"))
    count = whole("draws", draws, 1, "give how many rotations to draw")
    return clipped(qdrift_diamond(strength, count) / 2.0, "qDRIFT, (2 λ² t² / N) exp(2 λ t / N)", CAMPBELL)


def least_qdrift_draws(one_norm: float, time: float, tolerance: float) -> int:
    """Return the least number of draws for which `qdrift_bound` gives a half diamond norm within a tolerance.

    Parameters
    ----------
    one_norm : float
        λ = Σ|c| without the identity.
    time : float
    tolerance : float
        Positive, on (1/2)‖E - U‖_⋄.

    Returns
    -------
    int

    Raises
    ------
    ArgumentError
        A number is not finite or out of range, or more than 2**53 draws would be needed.

    Examples
    --------
    >>> least_qdrift_draws(one_norm=4.3, time=1.0, tolerance=1e-2)
    3707
    """
    strength = _strength(one_norm) * abs(finite("time", time, "give a real number"))
    limit = finite("tolerance", tolerance, "give a positive number")
    if limit <= 0.0:
        raise ArgumentError(
            f"tolerance: is not positive ({tolerance!r}); give a positive number", argument="tolerance", value=tolerance
        )

    def enough(count: int) -> bool:
        return qdrift_diamond(strength, count) / 2.0 <= limit

    high = 1
    while not enough(high):
        high *= 2
        if high > 2**53:
            raise ArgumentError(
                f"tolerance: needs more than 2**53 draws ({tolerance!r}); ask for more, or a shorter time",
                argument="tolerance",
                value=tolerance,
            )
    low = high // 2
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle, high)
    return high


def random_direction_bound(parts: int, largest: float, time: float, steps: int) -> ChannelBound:
    """Bound the channel of first-order steps run forward or backward with probability 1/2 each.

    With x = L Λ |t| and r steps, ‖E - U‖_⋄ ≤ x⁴/r³ exp(2x/r) + 2x³/(3r²) exp(x/r), without the factor 1/2.

    Parameters
    ----------
    parts : int
        L, the number of parts.
    largest : float
        Λ, a bound on the largest spectral norm of a part.
    time : float
    steps : int
        r, at least 1.

    Returns
    -------
    ChannelBound

    Raises
    ------
    ArgumentError
        A number is negative, not finite or not whole.

    Notes
    -----
    Orders drawn uniformly for each step obey the same bound: an order and its reverse are equally likely, the bound
    does not depend on the order, and the diamond norm is convex.

    References
    ----------
    .. [1] A. M. Childs, A. Ostrander, Y. Su, Quantum 3, 182 (2019), theorem on the first-order formula; from memory.

    Examples
    --------
    >>> round(random_direction_bound(parts=3, largest=0.5, time=1.0, steps=10).diamond, 6)
    0.032975
    """
    count = whole("parts", parts, 0, "give the number of parts")
    repeats = whole("steps", steps, 1, "give a number of equal steps")
    x = count * _strength(largest, "largest") * abs(finite("time", time, "give a real number")) / repeats
    diamond = repeats * (x**4 * exponential(2.0 * x) + 2.0 / 3.0 * x**3 * exponential(x)) if x < 1e3 else math.inf
    return clipped(diamond / 2.0, "randomised first order, x⁴/r³ exp(2x/r) + 2x³/(3r²) exp(x/r)", CHILDS)


def qdrift_diamond(strength: float, draws: int) -> float:
    """Return the qDRIFT bound without the factor 1/2, for λ|t| = `strength`; may be infinite."""
    turn = 2.0 * strength / draws
    return draws * 2.0 * drift_tail(turn) * ROUNDING


def drift_step(turns: Sequence[float], probabilities: Sequence[float], total: float) -> float:
    """Bound one step of qDRIFT with any probabilities, in the diamond norm without the factor 1/2.

    Parameters
    ----------
    turns : sequence of float
        |θ_j|, the angle of term j's rotation.
    probabilities : sequence of float
        p_j, so that Σ p_j θ_j P_j is the generator of the step.
    total : float
        Σ p_j |θ_j|.

    Notes
    -----
    Both exp(-i ad(θ P)), of norm at most exp(2|θ|), and the exact step start with the identity and, averaged, the same
    first order. What is left of either is Σ_{n≥2} x^n/n! ≤ (x²/2) eˣ, with x = 2|θ_j| and x = 2 `total`. Equal angles
    |θ_j| = λ t / N give the published bound.
    """
    mixed = math.fsum(p * drift_tail(2.0 * turn) for p, turn in zip(probabilities, turns, strict=True))
    return (mixed + drift_tail(2.0 * total)) * ROUNDING


def drift_tail(x: float) -> float:
    """Return (x²/2) eˣ, which bounds Σ_{n≥2} xⁿ/n!."""
    return 0.5 * x * x * exponential(x) if x < 1e3 else math.inf


def clipped(half_diamond: float, theorem: str, source: str) -> ChannelBound:
    """Make a bound, never above the trivial one."""
    value = half_diamond * ROUNDING
    return ChannelBound(value, theorem, source) if value < 1.0 else ChannelBound(1.0, f"trivial: {TRIVIAL}", source)


def exponential(x: float) -> float:
    """Return eˣ, infinite where it overflows."""
    return math.exp(x) if x < 700.0 else math.inf


def _strength(value: float, argument: str = "one_norm") -> float:
    number = finite(argument, value, "give a number from 0")
    if number < 0.0:
        raise ArgumentError(
            f"{argument}: is negative ({value!r}); give a number from 0", argument=argument, value=value
        )
    return number
