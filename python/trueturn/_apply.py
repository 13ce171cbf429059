"""An operator times a state vector, by the engine."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from trueturn import _native, _threads

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
    With y the number of Y factors, (P v)[j] = i^y (-1)^(bits shared by z and k) v[k] at k = j ^ x.
    """
    source = np.array(vector, dtype=np.complex128, order="C")
    image = np.empty_like(source)
    _native.apply_terms(operator._terms, source, image, _threads.resolve(None))
    return image
