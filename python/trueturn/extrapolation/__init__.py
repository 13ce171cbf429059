"""Extrapolation of observables to infinitely many steps, with what it costs in shots and noise."""

from trueturn.extrapolation.result import Extrapolation
from trueturn.extrapolation.run import extrapolate
from trueturn.extrapolation.weights import multiproduct_weights, well_conditioned_steps

__all__ = ["Extrapolation", "extrapolate", "multiproduct_weights", "well_conditioned_steps"]
