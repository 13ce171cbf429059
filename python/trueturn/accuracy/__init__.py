"""Error science: proven bounds, effective Hamiltonians, measured errors."""

from trueturn.accuracy.bounds import Bound, bound, steps_by_bound
from trueturn.accuracy.curves import ErrorCurve, error_curves
from trueturn.accuracy.error_split import ErrorSplit, split_error
from trueturn.accuracy.intervals import ErrorInterval
from trueturn.accuracy.operator_norm import operator_error
from trueturn.accuracy.prediction import Prediction
from trueturn.accuracy.product_inputs import ProductErrors, product_errors
from trueturn.accuracy.random_inputs import rms_error
from trueturn.accuracy.simulated import SimulatedSeries, simulated_hamiltonian, simulated_series

__all__ = [
    "Bound",
    "ErrorCurve",
    "ErrorInterval",
    "ErrorSplit",
    "Prediction",
    "ProductErrors",
    "SimulatedSeries",
    "bound",
    "error_curves",
    "operator_error",
    "product_errors",
    "rms_error",
    "simulated_hamiltonian",
    "simulated_series",
    "split_error",
    "steps_by_bound",
]
