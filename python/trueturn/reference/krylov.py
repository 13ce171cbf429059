"""A second, independent method: short Lanczos runs with a computable error bound."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _memory, _native
from trueturn.errors import ToleranceError
from trueturn.operator import Operator
from trueturn.reference.certificate import UNIT, Certificate

__all__ = ["evolve"]

Vector = npt.NDArray[np.complex128]
Tick = Callable[[int, int], object]

_DIMENSION = 24
# Of the tolerance; the rest is for rounding.
TRUNCATION_SHARE = 0.9


def evolve(
    operator: Operator,
    start: npt.NDArray[Any],
    times: Sequence[float],
    tolerance: float,
    *,
    threads: int,
    progress: Tick | None,
) -> tuple[Certificate, Iterator[tuple[float, Vector]]]:
    """Evolve by Lanczos runs of at most 24 vectors; for cross-checks, since it holds them all.

    Notes
    -----
    After m Lanczos steps from a unit vector, ‖exp(-iHτ)v - V exp(-iTτ) e_1‖ ≤ β_1 … β_m τ^m / m!, the β being the
    off-diagonals of T and the last remainder [1]_. The bound is proven in exact arithmetic; vectors are
    re-orthogonalised twice, and the effect of rounding is estimated, not proven: the certificate says so.

    Unlike the Chebyshev method the step lengths depend on the vectors, so the whole evolution is carried out here and
    the certificate is made from what happened.

    References
    ----------
    .. [1] T. Jawecki, W. Auzinger, O. Koch, Computable upper error bounds for Krylov approximations to matrix
       exponentials and associated φ-functions, BIT Numer. Math. 60, 157 (2020), Theorem 1 (from memory).
    """
    from scipy.linalg import eigh_tridiagonal  # slow to import, so only where it is needed

    dimension = min(_DIMENSION, start.size)
    size = 16 * start.size
    _memory.require(
        (dimension + 2 + len(times)) * size, "reference", lambda n: (dimension + 2 + len(times)) * (16 << n)
    )
    last = times[-1]
    vector: Vector = start.astype(np.complex128)
    norm = float(np.linalg.norm(vector))
    found: list[tuple[float, Vector]] = []
    truncation, rounding = {}, {}
    now = spent = rounded = 0.0
    applications = 0
    for target in times:
        while now < target:
            basis, diagonal, off_diagonal = _lanczos(operator, vector / norm, dimension, threads)
            applications += len(diagonal)
            if len(diagonal) < dimension or off_diagonal[-1] <= _floor(operator):
                # The space is invariant up to a remainder, which acts all along.
                length, bound = target - now, float(off_diagonal[-1]) * (target - now)
            else:
                length, bound = _step_length(off_diagonal, target - now, TRUNCATION_SHARE * tolerance / last)
            if length < 1e-12 * last:
                raise ToleranceError(
                    f"tolerance: too small for the Krylov method ({tolerance:g}); use the Chebyshev method",
                    tolerance=tolerance,
                    achievable=1e-13 * last,
                )
            values, vectors = eigh_tridiagonal(diagonal, off_diagonal[:-1])
            weights = vectors @ (np.exp(-1j * values * length) * vectors[0])
            vector = norm * (basis[: len(diagonal)].T @ weights)
            now = target if length >= target - now else now + length
            spent += norm * bound
            rounded += UNIT * norm * (8.0 * len(diagonal) + 4.0 * length * operator.one_norm())
            if progress is not None:
                progress(round(1000 * now / last), 1000)
        truncation[target], rounding[target] = spent, rounded
        found.append((target, vector.copy()))
    low = -operator.one_norm()
    certificate = Certificate(
        method="krylov",
        error_bound={time: truncation[time] + rounding[time] for time in times},
        truncation=truncation,
        rounding=rounding,
        spectral_interval=(low, -low),
        spectral_route="sum of |coefficients|; not used by this method",
        applications=applications,
        proven=False,
        notes=(
            "Truncation: proven in exact arithmetic from the Lanczos coefficients.",
            "Rounding: estimated, not proven.",
        ),
    )
    return certificate, iter(found)


def _lanczos(
    operator: Operator, unit: Vector, dimension: int, threads: int
) -> tuple[Vector, npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Return basis rows, diagonal and off-diagonal (with the last remainder) of a Lanczos run."""
    basis = np.empty((dimension, unit.size), dtype=np.complex128)
    basis[0] = unit
    image = np.empty_like(unit)
    diagonal, off_diagonal = [], []
    floor = _floor(operator)
    for k in range(dimension):
        _native.apply_terms(operator._terms, np.ascontiguousarray(basis[k]), image, threads)
        diagonal.append(float(np.vdot(basis[k], image).real))
        for _ in range(2):
            image -= basis[: k + 1].T @ (basis[: k + 1].conj() @ image)
        remainder = float(np.linalg.norm(image))
        off_diagonal.append(remainder)
        if remainder <= floor:
            break
        if k + 1 < dimension:
            basis[k + 1] = image / remainder
    return basis, np.array(diagonal), np.array(off_diagonal)


def _floor(operator: Operator) -> float:
    """Return the size of a remainder that is nothing but rounding."""
    return 64.0 * UNIT * max(operator.one_norm(), UNIT)


def _step_length(off_diagonal: npt.NDArray[np.float64], longest: float, rate: float) -> tuple[float, float]:
    """Return the longest step whose bound stays below `rate` times the step, and its bound."""
    m = len(off_diagonal)
    log_product = float(np.log(off_diagonal).sum()) - math.lgamma(m + 1)
    if m == 1:
        return longest, min(2.0, math.exp(log_product) * longest)
    length = min(longest, math.exp((math.log(rate) - log_product) / (m - 1)))
    return length, math.exp(log_product + m * math.log(length))
