"""Formulas compared at equal cost, in one call, one table and one picture."""

from trueturn.comparison.result import Comparison, Point
from trueturn.comparison.run import compare

__all__ = ["Comparison", "Point", "compare"]
