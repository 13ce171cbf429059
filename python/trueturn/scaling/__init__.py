"""How step counts grow with size, time or tolerance: measured, fitted, extrapolated."""

from trueturn.scaling.power_law import FEWEST_POINTS, HeldOut, PowerLaw, Prediction, fit_steps

__all__ = ["FEWEST_POINTS", "HeldOut", "PowerLaw", "Prediction", "fit_steps"]
