"""McLachlan's splitting method of five stages and order 4, in closed form."""

from __future__ import annotations

from decimal import Decimal, localcontext

from trueturn.formulas.entry import Entry

__all__ = ["ENTRIES"]


def _outer() -> tuple[Decimal, ...]:
    """The a: (14 - √19)/108, (20 - 7 √19)/108, and what is missing to 1/2, mirrored."""
    with localcontext() as context:
        context.prec = 60
        root = Decimal(19).sqrt()
        first, second = (14 - root) / 108, (20 - 7 * root) / 108
        half = (first, second, Decimal(1) / 2 - first - second)
        return half + half[::-1]


ENTRIES = (
    Entry(
        name="mclachlan-4",
        order=4,
        source=(
            "R. I. McLachlan, 'On the numerical integration of ordinary differential equations by symmetric "
            "composition methods', SIAM J. Sci. Comput. 16, 151 (1995), order 4, m = 5; also E. Hairer, C. Lubich "
            "and G. Wanner, 'Geometric Numerical Integration', equation V.3.6; from memory"
        ),
        a=_outer(),
        b=("0.4", "-0.1", "0.4", "-0.1", "0.4"),
    ),
)
