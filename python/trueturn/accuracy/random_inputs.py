"""The error on random inputs: the root mean square of ‖(S - U)ψ‖ over Haar-random states.

Exactly, E‖Dψ‖² = tr(D†D)/d = ‖D‖_F²/d for D = S - U and d = 2^n, since E|ψ⟩⟨ψ| = 1/d; a 1-design is enough for that
[1]_. Up to 10 qubits the Frobenius norm is computed; beyond it is estimated from m sampled states, with an interval that
holds for any D and any m:

Write μ = ‖D‖_F²/d and ‖Dψ‖² = Σ_j σ_j² |⟨u_j, ψ⟩|². So X = ‖Dψ‖²/μ is a mean, with weights w_j = σ_j²/Σσ², of the
exchangeable variables Y_j = d |⟨u_j, ψ⟩|². The expectation of a convex function φ of it is convex and symmetric in w, so on
weights that are at most 1/K (K whole) it is largest at their extreme points, K equal weights:
E φ(X) ≤ E φ((Y_1 + … + Y_K)/K). With G_j independent exponential variables of mean 1 and T = ΣG_j/d, the vector (G_j/T) is
distributed as (Y_j) and independent of T, whose mean is 1; by Jensen's inequality
E φ(ΣY_j/K) ≤ E φ(ΣG_j/K). So every exponential moment of X is at most that of a mean of K exponential variables, and Chernoff's
bound gives for the mean M of m samples

    P(M ≥ aμ) ≤ exp(-mK(a - 1 - ln a)) for a > 1, and the same for P(M ≤ aμ) with a < 1.

K = 1 always holds. Where a bound σ_max on ‖D‖ is known, K = ⌊d μ/σ_max²⌋ holds too, with μ replaced by a lower bound
that the first step gives at half of the allowed probability: spread-out errors need few samples.

References
----------
.. [1] Q. Zhao, Y. Zhou, A. F. Shaw, T. Li, A. M. Childs, Hamiltonian simulation with random inputs, Phys. Rev. Lett. 129,
   270502 (2022). From memory; the identity is derived above, and so is the interval.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from trueturn import _threads
from trueturn.accuracy.difference import (
    Difference,
    PlannedEvolution,
    dense_difference,
    exact_evolution,
    require_circuit,
)
from trueturn.accuracy.intervals import ErrorInterval
from trueturn.accuracy.operator_norm import checked_confidence, checked_method
from trueturn.errors import ArgumentError
from trueturn.operator import Operator
from trueturn.randomised.checks import finite, whole
from trueturn.reference.certificate import UNIT
from trueturn.reference.dense import ROUNDING_NOTE
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["mean_interval", "rms_error"]

_SAMPLING_NOTE = (
    "Holds with a probability of at least {:g} over {} Haar-random states, drawn by NumPy's PCG64 and taken as random."
)


def rms_error(
    rotations: Rotations,
    operator: Operator,
    time: float,
    *,
    method: str | None = None,
    samples: int = 64,
    confidence: float = 0.99,
    norm: ErrorInterval | float | None = None,
    seed: int = 0,
    angle_roundings: int = 0,
    threads: int | None = None,
) -> ErrorInterval:
    """Return an interval that holds √E‖(S - exp(-iHt))ψ‖² over Haar-random ψ, which is ‖S - exp(-iHt)‖_F / 2^(n/2).

    Parameters
    ----------
    rotations, operator, time, angle_roundings, threads
        As for `operator_error`.
    method : "dense", "sampled" or None
        Whole matrices (10 qubits at most) or random states. None: dense up to 10 qubits.
    samples : int
        Random states; each costs a run of the circuit and a reference evolution.
    confidence : float
        Least probability, over the samples, with which the interval holds.
    norm : ErrorInterval or float, optional
        An upper bound on ‖S - exp(-iHt)‖, such as what `operator_error` gave: narrows the interval. The probability
        with which an interval of kind ``"confidence"`` fails is taken from what `confidence` allows. One below an error
        that is measured here is refused; whether it bounds the errors of all other states is not checked.
    seed : int
        Sample k is ``State.random(qubits, seed + k)``.

    Returns
    -------
    ErrorInterval
        Of kind ``"dense"``, with rounding estimated, or ``"confidence"``.

    Raises
    ------
    ArgumentError, OperatorError, StateShapeError, MemoryRefusedError, ToleranceError
        As for `operator_error`; or `norm` fails more often than `confidence` allows, or an error above it is measured.

    Notes
    -----
    Without `norm` 64 samples give the error within about 25 per cent at 99 per cent confidence, whatever the circuit.
    Everything that can be wrong with one measured ‖(S - U)ψ‖ shifts the root mean square by no more (Minkowski).

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> circuit = tt.formula("strang").rotations(parts, 1.0, 10)
    >>> found = tt.rms_error(circuit, tt.Operator("X_0 + Z_0"), 1.0)
    >>> f"{found.high:.6f}"
    '0.002741'
    """
    circuit, hamiltonian, span = require_circuit(rotations, operator, time)
    chosen = checked_method(method, circuit.qubits, "sampled")
    level = checked_confidence(confidence)
    count = whole("samples", samples, 1, "give the number of random states, such as 64")
    first = whole("seed", seed, 0, "give 0 or more")
    roundings = whole("angle_roundings", angle_roundings, 0, "give 0 for exact angles")
    largest, spent = _checked_norm(norm, 1.0 - level)
    workers = _threads.resolve(threads)
    exact = exact_evolution(hamiltonian, span, dense=chosen == "dense", threads=workers)
    if not isinstance(exact, PlannedEvolution):
        matrix, error = dense_difference(circuit, exact, threads=workers, angle_roundings=roundings)
        value = float(np.linalg.norm(matrix)) / math.sqrt(len(matrix))
        _require_above(norm, largest, float(np.max(np.linalg.norm(matrix, axis=0))) - error)
        slack = error + UNIT * len(matrix) * value
        return ErrorInterval(value - slack, value + slack, kind="dense", proven=False, notes=(ROUNDING_NOTE,))
    difference = Difference(circuit, exact, threads=workers, angle_roundings=roundings)
    squares = []
    for k in range(count):
        image = difference.apply(State.random(circuit.qubits, first + k).amplitudes)
        squares.append(difference.norm(image) ** 2)
    _require_above(norm, largest, math.sqrt(max(squares)) - difference.slack)
    measured = math.sqrt(math.fsum(squares) / count)
    lowest, highest = max(0.0, measured - difference.slack), measured + difference.slack
    chance = 1.0 - level - spent
    if largest is not None:
        chance /= 2.0  # half for the step that gives K, half for the one that uses it
    below, above = mean_interval(1.0, count, 1, chance)
    if largest is not None and largest > 0.0:
        least = lowest**2 * below
        spread = math.floor(2.0**circuit.qubits * least / largest**2 * (1.0 - 1e-9))
        if spread > 1:
            below, above = mean_interval(1.0, count, spread, chance)
    low, high = lowest * math.sqrt(below), highest * math.sqrt(above)
    if largest is not None:
        high = min(high, largest)
    note = _SAMPLING_NOTE.format(level, count)
    return ErrorInterval(min(low, high), high, kind="confidence", proven=False, confidence=level, notes=(note,))


def mean_interval(mean: float, samples: int, spread: int, chance: float) -> tuple[float, float]:
    """Return an interval for μ from the mean of samples of ‖Dψ‖², by Chernoff's bound; see the module.

    Parameters
    ----------
    mean : float
        M, not negative.
    samples : int
        m.
    spread : int
        K: no weight σ_j²/Σσ² exceeds 1/K.
    chance : float
        Probability with which the interval may fail, half of it on either side.

    Examples
    --------
    >>> low, high = mean_interval(1.0, 64, 1, 0.01)
    >>> f"{low:.3f} {high:.3f}"
    '0.683 1.547'
    """
    budget = math.log(2.0 / chance) / (samples * spread)

    def excess(log_a: float) -> float:
        return math.expm1(log_a) - log_a - budget

    # In ln a, so that a near 1 and near 0 keep their digits. For a < 1, -ln a - 1 < a - 1 - ln a, so the crossing lies
    # above ln a = -budget - 1; for a > 1, (ln a)²/2 < a - 1 - ln a, so it lies below √(2 budget).
    above = _root(excess, 0.0, math.sqrt(2.0 * budget))
    below = _root(excess, 0.0, -budget - 1.0)
    return mean * math.exp(-above) * (1.0 - 1e-9), mean * math.exp(-below) * (1.0 + 1e-9)


def _root(function: Callable[[float], float], inside: float, outside: float) -> float:
    """Bisect between a point where the function is negative and one where it is not; the latter is returned."""
    for _ in range(200):
        middle = 0.5 * (inside + outside)
        if middle in (inside, outside):
            break
        inside, outside = (middle, outside) if function(middle) < 0.0 else (inside, middle)
    return outside


def _require_above(norm: object, largest: float | None, seen: float) -> None:
    """Refuse a bound on the norm that the error on some unit vector exceeds; `seen` is less what can be wrong with it."""
    if largest is not None and largest < seen * (1.0 - 1e-9):
        raise ArgumentError(
            f"norm: is no upper bound ({largest:g}), since an error of {seen:g} was measured; give operator_error(…), or "
            "leave it out",
            argument="norm",
            value=norm,
        )


def _checked_norm(norm: object, chance: float) -> tuple[float | None, float]:
    """Return a bound on the norm, and the probability with which it fails."""
    if norm is None:
        return None, 0.0
    if isinstance(norm, ErrorInterval):
        spent = 0.0 if norm.confidence is None else 1.0 - norm.confidence
        if spent >= chance:
            raise ArgumentError(
                f"norm: holds with a probability of {norm.confidence:g} only, and confidence={1.0 - chance:g} is asked; "
                "ask operator_error for more, or for less here",
                argument="norm",
                value=norm,
            )
        return norm.high, spent
    value = finite("norm", norm, "give an upper bound on the operator error, or leave it out")
    if value < 0.0:
        raise ArgumentError(f"norm: is negative ({norm!r}); give 0 or more", argument="norm", value=norm)
    return value, 0.0
