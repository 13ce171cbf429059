"""Exact diagonalisation for small systems."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn.operator import Operator
from trueturn.reference.certificate import UNIT, Certificate

__all__ = ["ROUNDING_NOTE", "Diagonalised", "diagonalised", "evolve"]

ROUNDING_NOTE = "Rounding: from the measured residual of the diagonalisation; estimated, not proven."


@dataclass(frozen=True)
class Diagonalised:
    """Eigenvalues and eigenvectors (columns) of an operator, and what is measured of their quality."""

    values: npt.NDArray[np.float64]
    vectors: npt.NDArray[np.complex128]
    residual: float
    skew: float

    def evolution(self, time: float) -> npt.NDArray[np.complex128]:
        """Return exp(-iHt) as a matrix."""
        found: npt.NDArray[np.complex128] = (self.vectors * np.exp(-1j * self.values * time)) @ self.vectors.conj().T
        return found

    def rounding(self, time: float) -> float:
        """Estimate how far an evolution to `time` is from the exact one, in the spectral norm.

        With r = ‖H V - V Λ‖ and q = ‖V† V - 1‖ in the Frobenius norm: r t (1 + q) + 2 q, plus u (4 d + 4 ‖H‖ t) for
        the products and phases in dimension d. The last part is estimated.
        """
        norm = max(abs(float(self.values[0])), abs(float(self.values[-1])))
        arithmetic = 4.0 * UNIT * (self.values.size + norm * abs(time))
        return self.residual * abs(time) * (1.0 + self.skew) + 2.0 * self.skew + arithmetic


def diagonalised(operator: Operator) -> Diagonalised:
    """Diagonalise the whole matrix (12 qubits at most).

    Divide and conquer keeps V orthogonal to a few u; LAPACK's default of relatively robust representations does not.
    """
    from scipy.linalg import eigh  # slow to import, so only where it is needed

    matrix = operator.dense()
    values, vectors = eigh(matrix, driver="evd")
    residual = float(np.linalg.norm(matrix @ vectors - vectors * values))
    skew = float(np.linalg.norm(vectors.conj().T @ vectors - np.eye(values.size)))
    return Diagonalised(values, vectors, residual, skew)


def evolve(
    operator: Operator, start: npt.NDArray[Any], times: Sequence[float]
) -> tuple[Certificate, Iterator[tuple[float, npt.NDArray[np.complex128]]]]:
    """Evolve by diagonalising the whole matrix (12 qubits at most).

    Notes
    -----
    Nothing is truncated; for rounding see `Diagonalised.rounding`.
    """
    found = diagonalised(operator)
    values, vectors = found.values, found.vectors
    amplitudes = vectors.conj().T @ start.astype(np.complex128)
    rounding = {time: found.rounding(time) for time in times}
    certificate = Certificate(
        method="dense",
        error_bound=dict(rounding),
        truncation=dict.fromkeys(times, 0.0),
        rounding=rounding,
        spectral_interval=(float(values[0]), float(values[-1])),
        spectral_route="diagonalisation",
        applications=0,
        proven=False,
        notes=(ROUNDING_NOTE,),
    )
    return certificate, ((time, vectors @ (np.exp(-1j * values * time) * amplitudes)) for time in times)
