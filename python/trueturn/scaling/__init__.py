"""How step counts grow with size, time or tolerance: measured, fitted, extrapolated."""

from trueturn.scaling.power_law import FEWEST_POINTS, Forecast, HeldOut, PowerLaw, fit_steps
from trueturn.scaling.result import Extrapolated, Point, Scaling
from trueturn.scaling.run import Case, step_scaling

__all__ = [
    "FEWEST_POINTS",
    "Case",
    "Extrapolated",
    "Forecast",
    "HeldOut",
    "Point",
    "PowerLaw",
    "Scaling",
    "fit_steps",
    "step_scaling",
]
