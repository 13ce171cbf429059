"""An operator times a state vector."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from trueturn.operator import Operator

__all__ = ["operator_times"]


def operator_times(operator: Operator, vector: npt.NDArray[Any]) -> npt.NDArray[np.complex128]:
    """Return the operator times a vector.

    Parameters
    ----------
    operator : Operator
    vector : ndarray, shape (2**operator.qubits,)
        Bit q of the index is qubit q.

    Returns
    -------
    ndarray, shape (2**operator.qubits,), complex128

    Notes
    -----
    Each string gathers from one place: (P v)[j] = i^y (-1)^(bits shared by z and k) v[k] with k = j ^ x and
    y the number of Y factors.
    """
    from trueturn._matrices import diagonals

    index = np.arange(1 << operator.qubits)
    result = np.zeros(index.size, dtype=np.complex128)
    for x, entries in diagonals(operator.x_masks, operator.z_masks, operator.coefficients, operator.qubits):
        result += (entries * vector)[index ^ x]
    return result
