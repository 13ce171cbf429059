"""Splitting methods of Omelyan, Mryglod and Folk, each the best of its length for two operators.

They were ranked by the norm of the leading error for two general operators; how they do for more is measured
(`leading_error`).
"""

from __future__ import annotations

from decimal import Decimal, localcontext

from trueturn.formulas.entry import Entry, closed_even, closed_odd

__all__ = ["ENTRIES"]

AUTHORS = "I. P. Omelyan, I. M. Mryglod and R. Folk, "


def _least_norm() -> tuple[Decimal, ...]:
    """The a of order 2: λ, 1 - 2λ, λ with λ = 1/2 - c/12 + 1/(6c), c³ = 2 √326 + 36."""
    with localcontext() as context:
        context.prec = 60
        c = (2 * Decimal(326).sqrt() + 36) ** (1 / Decimal(3))
        outer = Decimal(1) / 2 - c / 12 + 1 / (6 * c)
        return outer, 1 - 2 * outer, outer


ENTRIES = (
    Entry(
        name="omelyan-2",
        order=2,
        source=(
            AUTHORS + "'Construction of high-order force-gradient algorithms for integration of motion in classical "
            "and quantum systems', Phys. Rev. E 65, 056706 (2002), λ in closed form; the same value in R. I. "
            "McLachlan, SIAM J. Sci. Comput. 16, 151 (1995); from memory"
        ),
        a=_least_norm(),
        b=("0.5", "0.5"),
    ),
    Entry(
        name="omelyan-4-s4",
        order=4,
        source=(
            AUTHORS + "'Optimized Forest-Ruth- and Suzuki-like algorithms for integration of motion in many-body "
            "systems', Comput. Phys. Commun. 146, 188 (2002), position version (PEFRL); from memory"
        ),
        a=closed_odd("0.1786178958448091", "-0.06626458266981849"),  # ξ, χ
        b=("0.7123418310626054", "-0.2123418310626054", "-0.2123418310626054", "0.7123418310626054"),  # 1/2 - λ, λ
    ),
    Entry(
        name="omelyan-4-s5",
        order=4,
        source=(
            AUTHORS + "'Symplectic analytically integrable decomposition algorithms', Comput. Phys. Commun. 151, 272 "
            "(2003), velocity version of 11 exponentials; from memory"
        ),
        a=closed_even("0.08398315262876693", "0.6822365335719091"),  # θ, λ
        b=closed_odd("0.2539785108410595", "-0.03230286765269967"),  # ρ, μ
    ),
)
