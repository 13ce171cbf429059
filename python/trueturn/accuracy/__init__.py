"""Error science: proven bounds, effective Hamiltonians, measured errors."""

from trueturn.accuracy.bounds import Bound, bound
from trueturn.accuracy.simulated import SimulatedSeries, simulated_hamiltonian, simulated_series

__all__ = [
    "Bound",
    "SimulatedSeries",
    "bound",
    "simulated_hamiltonian",
    "simulated_series",
]
