"""How step counts grow with size, time or tolerance: measured, fitted, extrapolated."""

from trueturn.scaling.power_law import HeldOut, PowerLaw, Prediction, fit_steps

__all__ = ["HeldOut", "PowerLaw", "Prediction", "fit_steps"]
