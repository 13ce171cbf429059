"""Ruth's method of order 3, the first published splitting above order 2; not symmetric."""

from __future__ import annotations

from fractions import Fraction

from trueturn.formulas.entry import Entry

__all__ = ["ENTRIES"]

ENTRIES = (
    Entry(
        name="ruth-3",
        order=3,
        source="R. D. Ruth, 'A canonical integration technique', IEEE Trans. Nucl. Sci. 30, 2669 (1983); from memory",
        a=(Fraction(1), Fraction(-2, 3), Fraction(2, 3)),
        b=(Fraction(-1, 24), Fraction(3, 4), Fraction(7, 24)),
    ),
)
