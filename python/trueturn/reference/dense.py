"""Exact diagonalisation for small systems."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn.operator import Operator
from trueturn.reference.certificate import UNIT, Certificate

__all__ = ["evolve"]


def evolve(
    operator: Operator, start: npt.NDArray[Any], times: Sequence[float]
) -> tuple[Certificate, Iterator[tuple[float, npt.NDArray[np.complex128]]]]:
    """Evolve by diagonalising the whole matrix (12 qubits at most).

    Notes
    -----
    Nothing is truncated. Rounding follows from what is measured of the diagonalisation, r = ‖H V - V Λ‖ and
    q = ‖V† V - 1‖ in the Frobenius norm: r t (1 + q) + 2 q, plus u (4 d + 4 ‖H‖ t) for the products and phases
    in dimension d. The last part is estimated. Divide and conquer keeps V orthogonal to a few u; LAPACK's default
    of relatively robust representations does not.
    """
    from scipy.linalg import eigh  # slow to import, so only where it is needed

    matrix = operator.dense()
    values, vectors = eigh(matrix, driver="evd")
    residual = float(np.linalg.norm(matrix @ vectors - vectors * values))
    skew = float(np.linalg.norm(vectors.conj().T @ vectors - np.eye(start.size)))
    amplitudes = vectors.conj().T @ start.astype(np.complex128)
    norm = max(abs(float(values[0])), abs(float(values[-1])))
    rounding = {
        time: residual * time * (1.0 + skew) + 2.0 * skew + 4.0 * UNIT * (start.size + norm * time) for time in times
    }
    certificate = Certificate(
        method="dense",
        error_bound=dict(rounding),
        truncation=dict.fromkeys(times, 0.0),
        rounding=rounding,
        spectral_interval=(float(values[0]), float(values[-1])),
        spectral_route="diagonalisation",
        applications=0,
        proven=False,
        notes=("Rounding: from the measured residual of the diagonalisation; estimated, not proven.",),
    )
    return certificate, ((time, vectors @ (np.exp(-1j * values * time) * amplitudes)) for time in times)
