"""Prove product-formula circuits against a certified reference."""

from trueturn.operator import Operator

__all__ = ["Operator"]
