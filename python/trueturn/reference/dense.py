"""Exact diagonalisation for small systems."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.linalg import eigh

from trueturn.operator import Operator
from trueturn.reference.certificate import UNIT, Certificate

__all__ = ["evolve"]


def evolve(
    operator: Operator, start: npt.NDArray[Any], times: Sequence[float]
) -> tuple[Certificate, Iterator[tuple[float, npt.NDArray[np.complex128]]]]:
    """Evolve by diagonalising the whole matrix (12 qubits at most).

    Notes
    -----
    Nothing is truncated. Rounding is estimated as u (20 d + 4 ‖H‖ t) for dimension d: LAPACK's diagonalisation is backward
    stable, but its constant is not proven.
    """
    values, vectors = eigh(operator.dense())
    amplitudes = vectors.conj().T @ start.astype(np.complex128)
    norm = max(abs(float(values[0])), abs(float(values[-1])))
    rounding = {time: UNIT * (20.0 * start.size + 4.0 * norm * abs(time)) for time in times}
    certificate = Certificate(
        method="dense",
        error_bound=dict(rounding),
        truncation=dict.fromkeys(times, 0.0),
        rounding=rounding,
        spectral_interval=(float(values[0]), float(values[-1])),
        spectral_route="diagonalisation",
        applications=0,
        proven=False,
        notes=("Rounding: estimated from backward stability, not proven.",),
    )
    return certificate, ((time, vectors @ (np.exp(-1j * values * time) * amplitudes)) for time in times)
