"""The operator error ‖S - exp(-iHt)‖ of a circuit, as an interval.

**Lower end.** For any unit vector v, ‖S - U‖ ≥ ‖(S - U)v‖; power iteration on D†D, D = S - U, finds a v for which
this is close. The vector ‖Dv‖ is measured in double precision with a bound δ on everything that is wrong with it, so
‖Dv‖ - δ is proven.

**Upper end by matrices.** Up to 10 qubits D is written out and its largest singular value computed.

**Upper end by confidence.** Let x be Haar-random, d = 2^n, u the right singular vector of the largest singular value
σ of D, and x_k the vector after k applications, D, D†, D, … in turn. Exactly, ‖x_k‖ ≥ σ^k |⟨u, x⟩|, and |⟨u, x⟩|² is
distributed as Beta(1, d - 1), so that

    P(|⟨u, x⟩|² < s) = 1 - (1 - s)^(d-1) ≤ (d - 1) s.

With s = α/(d - 1) the event |⟨u, x⟩|² ≥ s has a probability of at least 1 - α, and on it σ ≤ (‖x_k‖/√s)^(1/k) for
every k at once. This is the argument of Dixon [1]_ for complex vectors, with an exact tail; of many starts with k
iterations each and one start with many iterations, the latter is better, since the first factor falls as the k-th root.
Each computed application is off by at most δ per unit of norm, that is D + F_j acts instead of D with ‖F_j‖ ≤ δ, so the
computed vector y_k obeys ‖y_k - x_k‖ ≤ (σ + δ)^k - σ^k, and the bound taken is the largest σ with

    σ^k √s ≤ ‖y_k‖ + (σ + δ)^k - σ^k.

**A proven bound** from a theorem (`trueturn.bound`) can be handed in; the least upper end is taken, and 2 always holds.

References
----------
.. [1] J. D. Dixon, Estimating extremal eigenvalues and condition numbers of matrices, SIAM J. Numer. Anal. 20, 812
   (1983), theorem 1; from memory.
.. [2] J. Kuczyński, H. Woźniakowski, Estimating the largest eigenvalue by the power and Lanczos algorithms with a random
   start, SIAM J. Matrix Anal. Appl. 13, 1094 (1992); from memory.
"""

from __future__ import annotations

import math

import numpy as np

from trueturn import _threads
from trueturn.accuracy.bounds import Bound
from trueturn.accuracy.difference import (
    DENSE_QUBITS,
    DenseEvolution,
    Difference,
    PlannedEvolution,
    Vector,
    dense_difference,
    exact_evolution,
    require_circuit,
)
from trueturn.accuracy.intervals import ErrorInterval
from trueturn.errors import ArgumentError
from trueturn.operator import Operator
from trueturn.randomised.checks import finite, whole
from trueturn.reference.certificate import UNIT
from trueturn.reference.dense import ROUNDING_NOTE
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = ["checked_confidence", "checked_method", "norm_of_difference", "operator_error"]


def operator_error(
    rotations: Rotations,
    operator: Operator,
    time: float,
    *,
    method: str | None = None,
    bound: Bound | float | None = None,
    confidence: float = 0.999,
    iterations: int = 24,
    seed: int = 0,
    angle_roundings: int = 0,
    threads: int | None = None,
) -> ErrorInterval:
    """Return an interval (low, high) that holds ‖S - exp(-iHt)‖ in the spectral norm, global phase included.

    Parameters
    ----------
    rotations : Rotations
        The circuit S.
    operator : Operator
        H, on as many qubits; ħ = 1.
    time : float
        t; may be negative.
    method : "dense", "confidence" or None
        Whole matrices (10 qubits at most), or power iteration from a random start. None: dense up to 10 qubits.
    bound : Bound or float, optional
        A proven upper bound on the same error, such as ``trueturn.bound(formula, partition, time, steps)``: caps the
        upper end.
    confidence : float
        Least probability, over the random start, with which an upper end of kind ``"confidence"`` holds.
    iterations : int
        Applications of S - U or its adjoint; each costs a run of the circuit and a reference evolution.
    seed : int
        Draws the start.
    angle_roundings : int
        Roundings in each angle: 0 takes the angles as exact, ``Formula.ANGLE_ROUNDINGS`` judges the formula instead
        of the list of angles.
    threads : int, optional

    Returns
    -------
    ErrorInterval
        A pair (low, high) with `kind`, `proven`, `confidence` and `notes`.

    Raises
    ------
    ArgumentError
        An argument is out of range, or `bound` is below an error that was found.
    OperatorError
        `operator` is no Operator.
    StateShapeError
        Circuit and Hamiltonian act on different numbers of qubits.
    MemoryRefusedError
        Six state vectors (``"dense"``: six matrices) do not fit.
    ToleranceError
        Double precision certifies nothing for an evolution of this length.

    Notes
    -----
    The lower end is proven with ``"confidence"``; with ``"dense"`` rounding is estimated. The upper end of kind
    ``"confidence"`` exceeds the lower one by about a factor (2^n / (1 - confidence))^(1/(2 iterations)), if not by less.

    Examples
    --------
    >>> import trueturn as tt
    >>> parts = tt.Partition([tt.Operator("X_0"), tt.Operator("Z_0")])
    >>> circuit = tt.formula("strang").rotations(parts, 1.0, 10)
    >>> low, high = tt.operator_error(circuit, tt.Operator("X_0 + Z_0"), 1.0)
    >>> f"{low:.6f} {high:.6f}"
    '0.002741 0.002741'
    """
    circuit, hamiltonian, span = require_circuit(rotations, operator, time)
    chosen = checked_method(method, circuit.qubits)
    level = checked_confidence(confidence)
    rounds = whole("iterations", iterations, 1, "give the number of applications, such as 24")
    start = whole("seed", seed, 0, "give 0 or more")
    roundings = whole("angle_roundings", angle_roundings, 0, "give 0 for exact angles")
    limit = _checked_bound(bound)
    workers = _threads.resolve(threads)
    exact = exact_evolution(hamiltonian, span, dense=chosen == "dense", threads=workers)
    found = norm_of_difference(
        circuit, exact, confidence=level, iterations=rounds, seed=start, angle_roundings=roundings, threads=workers
    )
    return _capped(found, limit)


def norm_of_difference(
    rotations: Rotations,
    exact: DenseEvolution | PlannedEvolution,
    *,
    confidence: float,
    iterations: int,
    seed: int,
    angle_roundings: int,
    threads: int,
) -> ErrorInterval:
    """Bound ‖S - U‖ for a circuit and an evolution that is prepared; arguments as in `operator_error`, checked."""
    if isinstance(exact, PlannedEvolution):
        difference = Difference(rotations, exact, threads=threads, angle_roundings=angle_roundings)
        return _power_bound(difference, confidence, iterations, seed)
    matrix, error = dense_difference(rotations, exact, threads=threads, angle_roundings=angle_roundings)
    # LAPACK's singular values are off by a modest multiple of d u times the largest.
    largest = float(np.linalg.norm(matrix, 2))
    slack = error + 16.0 * UNIT * len(matrix) * largest
    return ErrorInterval(largest - slack, largest + slack, kind="dense", proven=False, notes=(ROUNDING_NOTE,))


def _power_bound(difference: Difference, confidence: float, iterations: int, seed: int) -> ErrorInterval:
    """Bound ‖D‖ from both sides by power iteration from one Haar-random start; see the module."""
    dimension = 1 << difference.qubits
    overlap = (1.0 - confidence) / (dimension - 1)
    vector: Vector = State.random(difference.qubits, seed).amplitudes
    low, high, log_norm = 0.0, 2.0, 0.0
    for k in range(1, iterations + 1):
        image = difference.apply(vector) if k % 2 else difference.apply_adjoint(vector)
        length = difference.norm(image)
        low = max(low, length - difference.slack)
        log_norm += math.log(max(length, difference.slack))
        high = min(high, _largest(k, log_norm, overlap, difference.slack))
        if length <= difference.slack:
            break  # nothing but rounding, which further iterations would amplify
        vector = image / length
    kind = "confidence" if high < 2.0 else "trivial"
    note = (
        f"The upper end holds with a probability of at least {confidence:g} over the random start (Dixon 1983)."
        if kind == "confidence"
        else "The upper end is that of any two unitary matrices."
    )
    return ErrorInterval(
        low,
        max(low, high),
        kind=kind,
        proven=kind == "trivial",
        confidence=confidence if kind == "confidence" else None,
        notes=(note,),
    )


def _largest(k: int, log_norm: float, overlap: float, slack: float) -> float:
    """The largest σ up to 2 with σ^k √s ≤ ‖y_k‖ + (σ + δ)^k - σ^k, in logarithms.

    Divided by σ^k: √s + 1 - (1 + δ/σ)^k ≤ ‖y_k‖/σ^k. The left side grows and the right side falls with σ, so
    that the set of such σ is an interval from 0, whose end bisection finds; it is rounded up.
    """
    root = math.sqrt(overlap)

    def holds(sigma: float) -> bool:
        grown = k * math.log1p(slack / sigma)
        left = root - math.expm1(grown) if grown < 700.0 else -math.inf
        return left <= 0.0 or math.log(left) <= log_norm - k * math.log(sigma)

    if holds(2.0):
        return 2.0
    low, high = 0.0, 2.0
    for _ in range(200):
        middle = 0.5 * (low + high)
        if middle in (low, high):
            break
        low, high = (middle, high) if holds(middle) else (low, middle)
    return min(2.0, high * (1.0 + 1e-9))


def _capped(found: ErrorInterval, limit: tuple[float, str] | None) -> ErrorInterval:
    """Lower the upper end to a proven bound, or to 2."""
    value, note = (2.0, "The upper end is that of any two unitary matrices.") if limit is None else limit
    if limit is not None and value < found.low:
        raise ArgumentError(
            f"bound: is below an error that was found ({value:g} < {found.low:g}); give one for this circuit and time",
            argument="bound",
            value=value,
        )
    if value > 2.0 or value >= found.high:
        return found
    kind = "trivial" if limit is None else "theorem"
    estimated = tuple(text for text in found.notes if text == ROUNDING_NOTE)
    return ErrorInterval(found.low, value, kind=kind, proven=not estimated, notes=(note, *estimated))


def _checked_bound(bound: object) -> tuple[float, str] | None:
    if bound is None:
        return None
    if isinstance(bound, Bound):
        if bound.inputs != "worst":
            raise ArgumentError(
                f"bound: is one for {bound.inputs} inputs ({bound.value:g}); give one with inputs='worst'",
                argument="bound",
                value=bound,
            )
        return bound.value, f"The upper end is proven: {bound.theorem}, {bound.source}."
    value = finite("bound", bound, "give a proven upper bound, or leave it out")
    if value < 0.0:
        raise ArgumentError(f"bound: is negative ({bound!r}); give 0 or more", argument="bound", value=bound)
    return value, "The upper end is a bound that was given as proven."


def checked_confidence(confidence: object) -> float:
    """Refuse what is no probability strictly between 0 and 1."""
    level = finite("confidence", confidence, "give a probability, such as 0.999")
    if not 0.0 < level < 1.0:
        raise ArgumentError(
            f"confidence: is not between 0 and 1 ({confidence!r}); give a probability, such as 0.999",
            argument="confidence",
            value=confidence,
        )
    return level


def checked_method(method: object, qubits: int, sampling: str = "confidence") -> str:
    """Return the method, chosen by the number of qubits where None is given."""
    choices = ("dense", sampling)
    if method is None:
        return "dense" if qubits <= DENSE_QUBITS else sampling
    if method not in choices:
        raise ArgumentError(
            f"method: unknown ({method!r}); give one of {', '.join(map(repr, choices))}, or None",
            argument="method",
            value=method,
        )
    if method == "dense" and qubits > DENSE_QUBITS:
        raise ArgumentError(
            f"method: dense is for at most {DENSE_QUBITS} qubits ({qubits} given); use {sampling!r}",
            argument="method",
            value=method,
        )
    return str(method)
