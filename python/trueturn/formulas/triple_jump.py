"""Triple jumps: three copies of the formula below, with the one in the middle backward in time.

    S_{2k+2}(τ) = S_{2k}(zτ) S_{2k}((1 - 2z)τ) S_{2k}(zτ),    z = 1 / (2 - 2^{1/(2k+1)}),    S_2 = Strang.

Order 2k takes 3^{k-1} Strang steps, fewer than Suzuki's five copies, with far larger errors. The weights are
computed at 60 digits, so each float is the correctly rounded one.
"""

from __future__ import annotations

from decimal import Decimal, localcontext

from trueturn.formulas.entry import Entry

__all__ = ["ENTRIES"]

SOURCE = (
    "H. Yoshida, 'Construction of higher order symplectic integrators', Phys. Lett. A 150, 262 (1990); E. Forest "
    "and R. D. Ruth, 'Fourth-order symplectic integration', Physica D 43, 105 (1990); M. Creutz and A. Gocksch, "
    "'Higher-order hybrid Monte Carlo algorithms', Phys. Rev. Lett. 63, 9 (1989); from memory"
)


def _weights(order: int) -> tuple[Decimal, ...]:
    """Weights of the Strang steps; `order` is even."""
    weights: tuple[Decimal, ...] = (Decimal(1),)
    with localcontext() as context:
        context.prec = 60
        for below in range(2, order, 2):
            z = 1 / (2 - Decimal(2) ** (1 / Decimal(below + 1)))
            weights = tuple(factor * weight for factor in (z, 1 - 2 * z, z) for weight in weights)
    return weights


ENTRIES = tuple(
    Entry(name=f"triple-jump-{order}", order=order, source=SOURCE, weights=_weights(order)) for order in (4, 6, 8)
)
