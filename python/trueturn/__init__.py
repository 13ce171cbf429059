"""Prove product-formula circuits against a certified reference."""

from trueturn import lattice, model
from trueturn.formulas import Formula, formula, formulas
from trueturn.operator import Operator
from trueturn.partition import Partition

__all__ = ["Formula", "Operator", "Partition", "formula", "formulas", "lattice", "model"]
