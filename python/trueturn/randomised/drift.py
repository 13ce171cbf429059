"""qDRIFT: a circuit of rotations drawn one by one, terms in proportion to their size."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np
import numpy.typing as npt

from trueturn.errors import ArgumentError
from trueturn.operator import Operator
from trueturn.randomised.channel import CAMPBELL, ChannelBound, clipped, drift_step, qdrift_bound
from trueturn.randomised.checks import checked_operator, finite, refuse_long_time, require_size, whole
from trueturn.randomised.columns import Columns, rounded
from trueturn.randomised.ensemble import Ensemble
from trueturn.rotations import Rotations

__all__ = ["Drift", "TermSampler", "qdrift"]


class TermSampler:
    """Draws rotations of an operator's terms, the identity left out.

    With probabilities p_j, a term drawn in a time τ split over N draws turns by c_j τ / (N p_j). The default p_j =
    |c_j| / λ makes all turns equal to λ τ / N but for their sign. Draws are exact up to the rounding of the
    probabilities, some u each.
    """

    def __init__(self, operator: Operator, probabilities: tuple[float, ...] | None) -> None:
        bare = operator.without_identity()
        self._x: list[int] = bare.x_masks.tolist()
        self._z: list[int] = bare.z_masks.tolist()
        coefficients: list[float] = bare.coefficients.tolist()
        self._rates: list[Fraction]
        weights: npt.NDArray[np.float64]
        if probabilities is None:
            norm = Fraction(bare.one_norm())
            self._rates = [norm if value > 0.0 else -norm for value in coefficients]
            weights = np.abs(bare.coefficients)
        else:
            total = sum(map(Fraction, probabilities), Fraction(0))
            pairs = zip(coefficients, probabilities, strict=True)
            self._rates = [Fraction(value) * total / Fraction(p) for value, p in pairs]
            weights = np.array(probabilities)
        ends = np.cumsum(weights / weights.max()) if len(weights) else weights
        self._ends = ends / ends[-1] if len(ends) else ends

    def write(self, columns: Columns, generator: np.random.Generator, time: Fraction, draws: int) -> None:
        """Append `draws` rotations for an evolution of length `time`; equal neighbours merge."""
        if not self._x:
            return
        terms = np.searchsorted(self._ends, generator.random(draws), side="right")
        terms = np.minimum(terms, len(self._x) - 1)
        starts = np.flatnonzero(np.concatenate([[True], terms[1:] != terms[:-1]]))
        lengths = np.diff(np.append(starts, draws))
        angles: dict[tuple[int, int], float] = {}
        for term, repeat in zip(terms[starts].tolist(), lengths.tolist(), strict=True):
            angle = angles.get((term, repeat))
            if angle is None:
                angle = angles[term, repeat] = rounded(repeat * self._rates[term] * time / draws)
            columns.x.append(self._x[term])
            columns.z.append(self._z[term])
            columns.angles.append(angle)


@dataclass(frozen=True)
class Drift(Ensemble):
    """Rotations drawn one by one from the terms of an operator; see `qdrift`."""

    hamiltonian: Operator
    total_time: float
    draws: int
    seed: int
    probabilities: tuple[float, ...] | None = None
    _sampler: TermSampler = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "_sampler", TermSampler(self.hamiltonian, self.probabilities))

    @property
    def qubits(self) -> int:
        """Number of qubits."""
        return self.hamiltonian.qubits

    @property
    def operator(self) -> Operator:
        """The operator whose terms are drawn."""
        return self.hamiltonian

    @property
    def time(self) -> float:
        """Total time."""
        return self.total_time

    def channel_bound(self) -> ChannelBound:
        """Bound the distance of the averaged channel from exp(-iHt); see `qdrift_bound` and `drift_step`."""
        bare = self.hamiltonian.without_identity()
        if self.probabilities is None:
            return qdrift_bound(bare.one_norm(), self.total_time, self.draws)
        total = math.fsum(self.probabilities)
        chances = [p / total for p in self.probabilities]
        step = abs(self.total_time) / self.draws
        turns = [abs(value) * step / p for value, p in zip(bare.coefficients.tolist(), chances, strict=True)]
        diamond = self.draws * drift_step(turns, chances, bare.one_norm() * step)
        theorem = "qDRIFT with given probabilities, second-order remainders of both channels added up"
        return clipped(diamond / 2.0, theorem, f"derived in trueturn.randomised.channel after {CAMPBELL}")

    def _draw(self, generator: np.random.Generator) -> Rotations:
        columns = Columns()
        self._sampler.write(columns, generator, Fraction(self.total_time), self.draws)
        phase = 0.0 - self.hamiltonian.identity_coefficient * self.total_time
        return columns.rotations(self.qubits, phase, self.total_time)


def qdrift(
    operator: Operator, time: float, draws: int, seed: int, *, probabilities: Sequence[float] | None = None
) -> Drift:
    """Draw `draws` rotations, each of one term, so that their average follows exp(-i operator t).

    Parameters
    ----------
    operator : Operator
        The identity term becomes the exact global phase.
    time : float
        In inverse units of the coefficients; may be negative.
    draws : int
        N, rotations drawn for one circuit, at least 1. (How many circuits to draw is up to `Ensemble.samples`.)
    seed : int
        At least 0.
    probabilities : sequence of float, optional
        One for each term but the identity, in order, positive, with sum 1 within 1e-9 (and then scaled to it).
        Default |c| / λ with λ = Σ|c|.

    Returns
    -------
    Drift
        An `Ensemble`. Each draw turns by c t / (N p), which is ±λ t / N by default, rounded twice; equal neighbours
        merge, so that circuits have at most N rotations.

    Raises
    ------
    OperatorError
        `operator` is no Operator.
    ArgumentError
        `time` is not finite or makes an angle overflow, `draws` or `seed` is no whole number in range,
        `draws` above 10**7, or `probabilities` do not fit the terms, are not positive or do not sum to 1.

    References
    ----------
    .. [1] E. Campbell, Random compiler for fast Hamiltonian simulation, Phys. Rev. Lett. 123, 070503 (2019), from
       memory.
    .. [2] O. Kiss, M. Grossi, A. Roggero, Importance sampling for stochastic quantum simulations, Quantum 7, 977
       (2023), for other probabilities; from memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn import randomised
    >>> drift = randomised.qdrift(tt.Operator("0.6 X_0 - 0.4 Z_0"), time=1.0, draws=100, seed=1)
    >>> drift.sample(0).count <= 100
    True
    >>> drift.channel_bound().half_diamond < 0.0205
    True
    """
    hamiltonian = checked_operator("operator", operator)
    length = finite("time", time, "give a real number, negative to run backwards")
    count = whole("draws", draws, 1, "give how many rotations to draw")
    number = whole("seed", seed, 0, "give an integer of at least 0")
    require_size("draws", count, count)
    bare = hamiltonian.without_identity()
    if not math.isfinite(hamiltonian.identity_coefficient * length) or not math.isfinite(bare.one_norm() * length):
        raise refuse_long_time(length)
    chances = None if probabilities is None else _chances(probabilities, len(bare))
    return Drift(hamiltonian, length, count, number, chances)


def _chances(given: Sequence[float], terms: int) -> tuple[float, ...]:
    remedy = f"give {terms} positive numbers with sum 1, one for each term but the identity"

    def refused(wrong: str, value: object) -> ArgumentError:
        return ArgumentError(f"probabilities: {wrong} ({value!r}); {remedy}", argument="probabilities", value=given)

    try:
        found = [finite("probabilities", value, remedy) for value in given]
    except TypeError:
        raise refused("is not a sequence", given) from None
    if len(found) != terms:
        raise refused("do not fit the terms", len(found))
    for value in found:
        if value < 0.0:
            raise refused("one is negative", value)
        if value == 0.0:
            raise refused("one is zero, which would leave its term out", value)
    total = math.fsum(found)
    if terms and abs(total - 1.0) > 1e-9:
        raise refused("do not sum to 1", total)
    return tuple(found)
