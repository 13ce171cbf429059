"""What a real device leaves of a circuit's accuracy."""

from trueturn.device.budget import device_budget
from trueturn.device.causal_cone import CausalCone, causal_cone
from trueturn.device.result import Budget, Crossover, Spending

__all__ = ["Budget", "CausalCone", "Crossover", "Spending", "causal_cone", "device_budget"]
