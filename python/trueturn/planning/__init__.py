"""Plans: the least step count of every way to build a circuit, ranked by what it costs."""

from trueturn.planning.result import FrontPoint, Plan, PlanRow
from trueturn.planning.run import plan

__all__ = ["FrontPoint", "Plan", "PlanRow", "plan"]
