"""Circuits as gates of a device: what they cost, and OpenQASM files of them."""

from trueturn.export.cost import Cost
from trueturn.export.hardware import Hardware
from trueturn.export.table import CostTable, compare_costs

__all__ = ["Cost", "CostTable", "Hardware", "compare_costs"]
