"""An operator times a state vector."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from trueturn.operator import Operator

__all__ = ["operator_times", "parity_signs"]


def parity_signs(mask: int, qubits: int) -> npt.NDArray[np.float64]:
    """Return (-1)^(number of bits that `mask` and k share) for each index k.

    Parameters
    ----------
    mask : int
    qubits : int

    Returns
    -------
    ndarray, shape (2**qubits,), float64
    """
    signs = np.ones(1 << qubits)
    for qubit in range(qubits):
        half = 1 << qubit
        np.multiply(signs[:half], -1.0 if mask >> qubit & 1 else 1.0, out=signs[half : 2 * half])
    return signs


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
    With y the number of Y factors, (P v)[j] = i^y (-1)^(bits shared by z and k) v[k] at k = j ^ x.
    """
    index = np.arange(1 << operator.qubits)
    result = np.zeros(index.size, dtype=np.complex128)
    for x, z, coefficient in zip(operator.x_masks, operator.z_masks, operator.coefficients, strict=True):
        factor = coefficient * 1j ** ((x & z).bit_count() % 4)
        result += factor * (parity_signs(z, operator.qubits) * vector)[index ^ x]
    return result
