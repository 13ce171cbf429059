"""The two formulas from which the others are built."""

from __future__ import annotations

from trueturn.formulas.entry import Entry

__all__ = ["ENTRIES"]

ENTRIES = (
    Entry(
        name="lie",
        order=1,
        source=(
            "H. F. Trotter, 'On the product of semi-groups of operators', Proc. AMS 10, 545 (1959); "
            "S. Lloyd, 'Universal quantum simulators', Science 273, 1073 (1996); from memory"
        ),
        stages=((1.0, "forward"),),
    ),
    Entry(
        name="strang",
        order=2,
        source=(
            "G. Strang, 'On the construction and comparison of difference schemes', "
            "SIAM J. Numer. Anal. 5, 506 (1968); from memory"
        ),
        weights=(1.0,),
    ),
)
