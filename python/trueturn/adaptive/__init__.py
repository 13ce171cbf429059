"""Adaptive steps: lengths chosen along the way from an embedded pair of formulas."""

from __future__ import annotations

from trueturn.adaptive.pair import higher_formula
from trueturn.adaptive.run import AdaptiveRun, AdaptiveStep, adaptive

__all__ = ["AdaptiveRun", "AdaptiveStep", "adaptive", "higher_formula"]
