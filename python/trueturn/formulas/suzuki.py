"""Suzuki's fractal formulas: five copies of the formula below, with one backward in time.

    S_{2k+2}(τ) = S_{2k}(pτ)² S_{2k}((1 - 4p)τ) S_{2k}(pτ)²,    p = 1 / (4 - 4^{1/(2k+1)}),    S_2 = Strang.

Order 2k takes 5^{k-1} Strang steps. The weights are products of k - 1 factors, computed at 60 digits, so each
float is the correctly rounded one. Orders 4, 6 and 8 are listed; 10 and 12 are made when asked for.
"""

from __future__ import annotations

import re
from decimal import Decimal, localcontext

from trueturn.formulas.entry import Entry
from trueturn.formulas.order import MOST_ORDER

__all__ = ["ENTRIES", "NAME", "entry"]

SOURCE = (
    "M. Suzuki, 'Fractal decomposition of exponential operators', Phys. Lett. A 146, 319 (1990); "
    "'General theory of fractal path integrals', J. Math. Phys. 32, 400 (1991); from memory"
)
NAME = re.compile(r"suzuki-([1-9][0-9]?)")
"""Names of the family. Orders are even and go from 4 up to the highest that is measured."""


def entry(order: int) -> Entry | None:
    """Make the entry of an order; None where the order is odd, below 4 or too high to be measured."""
    if order % 2 or not 4 <= order <= MOST_ORDER:
        return None
    return Entry(name=f"suzuki-{order}", order=order, source=SOURCE, weights=_weights(order))


def _weights(order: int) -> tuple[Decimal, ...]:
    """Weights of the Strang steps; `order` is even."""
    weights: tuple[Decimal, ...] = (Decimal(1),)
    with localcontext() as context:
        context.prec = 60
        for below in range(2, order, 2):
            p = 1 / (4 - Decimal(4) ** (1 / Decimal(below + 1)))
            weights = tuple(factor * weight for factor in (p, p, 1 - 4 * p, p, p) for weight in weights)
    return weights


ENTRIES = tuple(made for made in map(entry, (4, 6, 8)) if made is not None)
