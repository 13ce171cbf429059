"""Laskar and Robutel's method for perturbed systems A + εB: its error is of order ε τ⁴ + ε² τ²."""

from __future__ import annotations

from decimal import Decimal, localcontext

from trueturn.formulas.entry import Entry
from trueturn.formulas.structure import NEAR_INTEGRABLE

__all__ = ["ENTRIES"]


def _outer() -> tuple[Decimal, ...]:
    """The a: the abscissas of Gauss quadrature with two points on [0, 1], as lengths."""
    with localcontext() as context:
        context.prec = 60
        inner = 1 / Decimal(3).sqrt()
        outer = (1 - inner) / 2
        return outer, 1 - 2 * outer, outer


ENTRIES = (
    Entry(
        name="laskar-robutel-2",
        order=2,
        source=(
            "J. Laskar and P. Robutel, 'High order symplectic integrators for perturbed Hamiltonian systems', Celest. "
            "Mech. Dyn. Astron. 80, 39 (2001), SABA2; from memory, verified"
        ),
        a=_outer(),
        b=("0.5", "0.5"),
        requires=NEAR_INTEGRABLE,
        special_order=4,
    ),
)
