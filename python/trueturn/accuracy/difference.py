"""The difference S - U of a circuit and the exact evolution, applied to vectors or written out as a matrix."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from trueturn import _memory
from trueturn.accuracy.circuit_matrix import circuit_matrix
from trueturn.accuracy.finest import FINEST
from trueturn.errors import ArgumentError, StateShapeError, ToleranceError
from trueturn.formulas.arguments import checked_time
from trueturn.operator import Operator
from trueturn.randomised.checks import checked_operator
from trueturn.reference import chebyshev
from trueturn.reference.certificate import UNIT, Certificate
from trueturn.reference.dense import Diagonalised, diagonalised
from trueturn.reference.schedule import Schedule
from trueturn.rotations import Rotations
from trueturn.state import State

__all__ = [
    "DENSE_QUBITS",
    "DenseEvolution",
    "Difference",
    "PlannedEvolution",
    "dense_difference",
    "exact_evolution",
    "require_circuit",
]

DENSE_QUBITS = 10
"""Up to here whole matrices are formed: 16 MiB each, and some seconds for a norm."""

_VECTORS = 6  # input, image of the circuit, and the reference's own: accumulator, two of the recurrence, result

Vector = npt.NDArray[np.complex128]


def require_circuit(rotations: object, operator: object, time: object) -> tuple[Rotations, Operator, float]:
    """Refuse what is no circuit, Hamiltonian and time on the same qubits.

    Raises
    ------
    ArgumentError
        `rotations` is no Rotations, or `time` not finite.
    OperatorError
        `operator` is no Operator.
    StateShapeError
        They act on different numbers of qubits.
    """
    if not isinstance(rotations, Rotations):
        raise ArgumentError(
            f"rotations: no Rotations ({type(rotations).__name__}); make them by a formula's .rotations",
            argument="rotations",
            value=rotations,
        )
    checked = checked_operator("operator", operator)
    if checked.qubits != rotations.qubits:
        raise StateShapeError(
            f"operator: acts on {checked.qubits} qubits, the circuit on {rotations.qubits}; "
            f"build it with qubits={rotations.qubits}",
            shape=checked.qubits,
            expected=rotations.qubits,
        )
    return rotations, checked, checked_time(time)


@dataclass(frozen=True)
class DenseEvolution:
    """exp(-iHt) as a matrix, and an estimate of its error in the spectral norm."""

    matrix: Vector
    error: float


@dataclass(frozen=True)
class _Direction:
    """exp(-iHt) for one sign of t: planned once, carried out for any start."""

    operator: Operator
    span: float
    certificate: Certificate | None
    plan: Schedule | None
    threads: int

    @property
    def bound(self) -> float:
        """How far a unit vector is from its exact image."""
        return 0.0 if self.certificate is None else self.certificate.error_bound[self.span]

    def __call__(self, start: Vector) -> Vector:
        if self.plan is None:
            return start
        steps = chebyshev.carry_out(self.operator, start, {self.span}, self.plan, self.threads, None)
        return next(vector for _, vector in steps)


@dataclass(frozen=True)
class PlannedEvolution:
    """exp(-iHt) and its inverse, applied to vectors with a certified error."""

    ahead: _Direction
    back: _Direction

    @property
    def bound(self) -> float:
        """How far the image of a unit vector is from the exact one, either way."""
        return max(self.ahead.bound, self.back.bound)


def exact_evolution(operator: Operator, time: float, *, dense: bool, threads: int) -> DenseEvolution | PlannedEvolution:
    """Prepare exp(-iHt), as a matrix or as a plan of certified evolutions as fine as double precision allows.

    Raises
    ------
    MemoryRefusedError
        The vectors or matrices needed do not fit.
    ToleranceError
        Double precision certifies nothing for an evolution of this length.
    """
    if dense:
        size = 1 << operator.qubits
        _memory.require(6 * 16 * size**2, "operator_error")
        if len(operator) == 0 or time == 0.0:
            return DenseEvolution(np.eye(size, dtype=np.complex128), 0.0)
        found = _diagonalised(operator)
        return DenseEvolution(found.evolution(time), found.rounding(time) + UNIT * math.sqrt(size))
    _memory.require(_VECTORS * (16 << operator.qubits), "operator_error", _VECTORS)
    if len(operator) == 0 or time == 0.0:
        still = _Direction(operator, 0.0, None, None, threads)
        return PlannedEvolution(still, still)
    low, high, route = chebyshev.bare_interval(operator, time)
    along, against = (low, high, route), (-high, -low, route)
    if time < 0.0:
        along, against = against, along
    return PlannedEvolution(_direction(operator, time, threads, along), _direction(operator, -time, threads, against))


# Several times of one Hamiltonian come in a row.
_diagonalised: Callable[[Operator], Diagonalised] = lru_cache(maxsize=1)(diagonalised)


def _direction(operator: Operator, time: float, threads: int, interval: tuple[float, float, str]) -> _Direction:
    """Plan as fine an evolution as double precision certifies, `FINEST` at most."""
    mirrored = operator if time >= 0.0 else -1.0 * operator
    span = abs(time)

    def planned(tolerance: float) -> tuple[Certificate, Schedule]:
        return chebyshev.planned(mirrored, operator.qubits, [span], tolerance, keep_all=False, interval=interval)

    try:
        certificate, plan = planned(FINEST)
    except ToleranceError as refusal:
        if not math.isfinite(refusal.achievable):
            raise
        certificate, plan = planned(refusal.achievable)
    return _Direction(mirrored, span, certificate, plan, threads)


class Difference:
    """D = S - U, S a circuit and U = exp(-iHt), and its adjoint, applied to unit vectors.

    Parameters
    ----------
    rotations : Rotations
    exact : PlannedEvolution
    threads : int
    angle_roundings : int
        Roundings that went into each angle of the circuit; 0 where the angles are taken as exact.

    Attributes
    ----------
    qubits : int
    slack : float
        An image is within this of the exact one for a unit vector: rounding of the circuit, error bound of the
        reference, and the subtraction.
    """

    def __init__(
        self, rotations: Rotations, exact: PlannedEvolution, *, threads: int, angle_roundings: int = 0
    ) -> None:
        self.qubits = rotations.qubits
        self._circuit, self._inverse, self._exact, self._threads = rotations, rotations.inverse(), exact, threads
        rounding = rotations.rounding_bound(angle_roundings)
        # The subtraction rounds each entry by u of itself, the norm of an image, summed in a tree, is good to 160 u,
        # and starts are unit vectors within as much.
        self.slack = (rounding + exact.bound) * (1.0 + 1e-9) + 1024.0 * UNIT

    def apply(self, vector: Vector) -> Vector:
        """Return (S - U) v for a vector of norm 1."""
        return self._minus(vector, self._circuit, self._exact.ahead)

    def apply_adjoint(self, vector: Vector) -> Vector:
        """Return (S - U)† v for a vector of norm 1."""
        return self._minus(vector, self._inverse, self._exact.back)

    def norm(self, vector: Vector) -> float:
        """Return ‖v‖, summed in a fixed tree."""
        return State.from_array(vector).norm(threads=self._threads)

    def _minus(self, vector: Vector, circuit: Rotations, evolve: Callable[[Vector], Vector]) -> Vector:
        image = State.from_array(vector.copy())
        image.apply(circuit, threads=self._threads)
        found: Vector = image.amplitudes
        found -= evolve(vector)
        return found


def dense_difference(
    rotations: Rotations, exact: DenseEvolution, *, threads: int, angle_roundings: int = 0
) -> tuple[Vector, float]:
    """Return the matrix of S - U on at most `DENSE_QUBITS` qubits, and an estimate of its error in the spectral norm.

    See `circuit_matrix` for the error of S, and `trueturn.reference.dense` for that of U, which comes from the measured
    quality of the diagonalisation.
    """
    found, error = circuit_matrix(rotations, threads=threads, angle_roundings=angle_roundings)
    return found - exact.matrix, error + exact.error
