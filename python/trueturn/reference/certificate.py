"""The parts of a reference's error bound, and how each was obtained."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from trueturn import _native
from trueturn.operator import Operator

__all__ = ["Certificate", "expectation_rounding", "expectation_shift", "norm_bound"]

UNIT = 2.0**-53


@dataclass(frozen=True)
class Certificate:
    """What bounds the 2-norm distance of each reference state from the exact one.

    Attributes
    ----------
    method : str
        ``"chebyshev"``, ``"krylov"`` or ``"dense"``.
    error_bound : mapping of float to float
        By time: truncation plus rounding.
    truncation, rounding : mapping of float to float
        By time: what cutting the expansion costs, and what arithmetic costs.
    spectral_interval : (float, float)
        Holds the whole spectrum. It was used for the expansion, or is the one that was, widened by a conserved field
        that was taken out.
    spectral_route : str
        How the interval was obtained.
    applications : int
        Times that the Hamiltonian was applied to a vector.
    proven : bool
        Whether every part is proven; where False, `notes` says which is estimated.
    notes : tuple of str
    """

    method: str
    error_bound: Mapping[float, float]
    truncation: Mapping[float, float]
    rounding: Mapping[float, float]
    spectral_interval: tuple[float, float]
    spectral_route: str
    applications: int
    proven: bool
    notes: tuple[str, ...] = ()

    @property
    def largest(self) -> float:
        """The largest error bound over the times."""
        return max(self.error_bound.values(), default=0.0)


def norm_bound(observable: Operator) -> float:
    """Return a proven upper bound on the norm of the observable without its identity term."""
    low, high = observable.spectral_interval()
    constant = observable.identity_coefficient
    return max(abs(low - constant), abs(high - constant))


def expectation_shift(norm: float, distance: float, length: float = 1.0) -> float:
    """Return how far an expectation moves at most when a vector moves by `distance`: ‖O‖ (2 ‖ψ‖ δ + δ²)."""
    return norm * distance * (2.0 * length + distance)


def expectation_rounding(observable: Operator, qubits: int) -> float:
    """Return a bound on the rounding of one expectation in a unit vector.

    The image of the state costs what the engine counts, whichever operators share the traversal. A product of amplitudes
    is rounded once; it passes through at most 16 additions in a tile, 128 over the tiles of a coset, 4 over the lanes of a
    vector, and a tree of at most `qubits` + 1 levels over cosets and passes.
    """
    image = _native.image_rounding(observable._terms)
    return 1.01 * UNIT * (image + (150.0 + qubits) * observable.one_norm())
