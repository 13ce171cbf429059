"""One exponential after another: exp(-i h Σ_k g_k H_k) on a state, with a proven bound on each.

An evolution in small steps takes thousands of short Chebyshev expansions, each of another operator. So nothing is
planned anew that could be shared: the spectrum of Σ g_k H_k is enclosed by adding up the enclosures of the H_k, and the
argument x = λ h is rounded up to a coarse grid, on which the Bessel functions are known already. A wider interval is
as true as a tight one and costs a few per cent of a short expansion.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from trueturn import _native
from trueturn.operator import Operator
from trueturn.reference import schedule as planning
from trueturn.reference.bessel import bessel_values, least_degree, truncation
from trueturn.rotations import Rotations

if TYPE_CHECKING:
    from trueturn.driven.hamiltonian import Driven

__all__ = ["Stepper"]

Vector = npt.NDArray[np.complex128]

_GRID = 8
"""Arguments x are powers of 2**(1/8): at most 9 % wider than needed."""

_LEAST = 2.0**-20
"""Below this x two or three terms do, whatever x is."""


class Stepper:
    """Applies exponentials to a vector of its own and adds up their proven bounds.

    Attributes
    ----------
    vector : ndarray, shape (2**n,), complex128
    bound : float
        Bound on the 2-norm distance of `vector` from what exact exponentials would have made.
    applications : int
        Times that a Hamiltonian was applied to a vector.
    """

    def __init__(self, driven: Driven, start: npt.NDArray[Any], threads: int) -> None:
        self._qubits = driven.qubits
        self.threads = threads
        self._bare = [operator.without_identity() for _, operator in driven.terms]
        self._constants = [operator.identity_coefficient for _, operator in driven.terms]
        self._sizes = [operator.one_norm() for _, operator in driven.terms]
        self._intervals = [operator.spectral_interval() if len(operator) else (0.0, 0.0) for operator in self._bare]
        self.vector: Vector = start.astype(np.complex128)
        self._previous = np.empty_like(self.vector)
        self._sum = np.empty_like(self.vector)
        self.restart(start)
        self.applications = 0

    def restart(self, start: npt.NDArray[Any]) -> None:
        """Go back to a start; applications go on counting."""
        np.copyto(self.vector, start)
        self.bound = 0.0

    def half_width(self, values: Sequence[float]) -> float:
        """Return half the width of the enclosure of Σ_k values[k] H_k."""
        low, high = self._interval(values)
        return 0.5 * (high - low)

    def _interval(self, values: Sequence[float]) -> tuple[float, float]:
        """Enclose the spectrum of Σ_k values[k] H_k without its identity, padded for the rounding of coefficients and sums."""
        ends = [
            (value * low, value * high) if value >= 0.0 else (value * high, value * low)
            for value, (low, high) in zip(values, self._intervals, strict=True)
        ]
        pad = 2.0**-50 * (len(ends) + 2) * self._size(values)
        return math.fsum(low for low, _ in ends) - pad, math.fsum(high for _, high in ends) + pad

    def _size(self, values: Sequence[float]) -> float:
        """Return Σ_k |values[k]| Σ|c|, which bounds the sum of |coefficients|."""
        return math.fsum(abs(value) * size for value, size in zip(values, self._sizes, strict=True))

    def apply(self, values: Sequence[float], length: float, allowed: float) -> None:
        """Apply exp(-i length Σ_k values[k] H_k); cutting the expansion costs at most `allowed`.

        Notes
        -----
        Coefficients Σ_k values[k] c_k are rounded: by at most (m + 1) u Σ_k |values[k] c_k| for m terms, which moves the
        exponential by as much times |length|.
        """
        blur = (len(values) + 1) * 2.0**-53 * self._size(values)
        bound = blur * abs(length)
        turn = length * math.fsum(value * share for value, share in zip(values, self._constants, strict=True))
        operator = Operator("0", qubits=self._qubits)
        for value, part in zip(values, self._bare, strict=True):
            operator = operator + value * part
        if len(operator) and length != 0.0:
            low, high = self._interval(values)
            centre = low + 0.5 * (high - low)
            bound += self._expand(operator, centre, max(high - centre, centre - low), length, allowed)
            turn += centre * length
        if turn:
            circuit = Rotations([], [], [], self._qubits, phase=-turn)
            _native.evolve(self.vector, circuit._circuit, self.threads, None)
            bound += 2.0**-53 * (5.0 + 4.0 * abs(turn))
        self.bound += (1.0 + self.bound) * bound

    def _expand(self, operator: Operator, centre: float, half: float, length: float, allowed: float) -> float:
        signed = math.copysign(1.0, length)
        least = max(half * abs(length) * (1.0 + 2.0**-48), _LEAST)
        x = 2.0 ** (math.ceil(_GRID * math.log2(least) + 1e-9) / _GRID)
        wide = x / abs(length)
        degree = least_degree(x, allowed)
        values = bessel_values(x)
        cut = np.pad(values[: degree + 1], (0, max(0, degree + 1 - len(values))))
        coefficients = [float(cut[0]), *(2.0 * cut[1:]).tolist()]
        scale = 2.0 / wide
        # exp(-i |h| (sign H)): a negative length turns the operator over
        _native.chebyshev_sums(
            operator._terms,
            signed * scale,
            -signed * scale * centre,
            self.vector,
            self._previous,
            [self._sum],
            [coefficients],
            self.threads,
            None,
        )
        self.vector, self._sum = self._sum, self.vector
        self.applications += degree
        local = planning._local_error(operator, centre, wide)
        widening = wide / half - 1.0 if half else math.inf
        growth = planning._growth(widening) if widening < 1.0 else planning._growth(1.0)
        rounding = planning._rounding(x, degree, centre * abs(length), local, growth)
        return planning.NORM_SLACK * truncation(x, degree) + rounding
