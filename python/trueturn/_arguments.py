"""Checks of numbers and masks that users pass in: a clean value, or an error that names the argument."""

from __future__ import annotations

import math
import numbers
import operator
from collections.abc import Iterable
from typing import Any, cast

import numpy as np
import numpy.typing as npt

from trueturn.errors import OperatorError

__all__ = ["MAX_QUBITS", "masks", "qubit_count", "qubit_number", "real", "real_array"]

MAX_QUBITS = 128


def qubit_count(value: object) -> int | None:
    """Return a number of qubits from 1 to 128, or None for None."""
    if value is None:
        return None
    count = _integer(value)
    if count is None or not 1 <= count <= MAX_QUBITS:
        message = f"qubits: out of range ({value!r}); give an integer from 1 to {MAX_QUBITS}"
        raise OperatorError(message, argument="qubits")
    return count


def qubit_number(value: object, limit: int, what: str, argument: str) -> int:
    """Return the number of one qubit, below `limit`."""
    number = _integer(value)
    if number is None or not 0 <= number < limit:
        message = f"{argument}: {what} out of range ({value!r}); give an integer from 0 to {limit - 1}"
        raise OperatorError(message, argument=argument)
    return number


def real(value: object, name: str) -> float:
    """Return a finite float; booleans and complex numbers are refused."""
    argument = name.partition("[")[0]
    if isinstance(value, bool) or not isinstance(value, numbers.Real):
        message = f"{name}: not a real number ({value!r}); give a finite real number"
        raise OperatorError(message, argument=argument)
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        message = f"{name}: not finite ({value!r}); give a finite real number"
        raise OperatorError(message, argument=argument)
    return number


def real_array(values: Any, name: str) -> npt.NDArray[np.float64]:
    """Return a one-dimensional contiguous float64 array; whether it is finite is left to the core."""
    try:
        array = np.asarray(values if hasattr(values, "__len__") else list(values))
    except (TypeError, ValueError):
        message = f"{name}: not a sequence of numbers ({values!r}); give one number for each term"
        raise OperatorError(message, argument=name) from None
    if array.ndim != 1:
        message = f"{name}: not one-dimensional (shape {array.shape}); give one number for each term"
        raise OperatorError(message, argument=name)
    if array.dtype.kind in "fiu":
        with np.errstate(over="ignore"):
            return np.ascontiguousarray(array, dtype=np.float64)
    return np.array([real(value, f"{name}[{number}]") for number, value in enumerate(array.tolist())], dtype=np.float64)


def masks(values: Any, name: str) -> list[int]:
    """Return bit masks as Python integers below 2**128."""
    entries = values.tolist() if isinstance(values, np.ndarray) else values
    try:
        numbers = [operator.index(mask) for mask in cast(Iterable[Any], entries)]
    except TypeError:
        message = f"{name}: not a sequence of integers ({values!r}); give bit masks"
        raise OperatorError(message, argument=name) from None
    for number, mask in enumerate(numbers):
        if not 0 <= mask < 1 << MAX_QUBITS:
            message = f"{name}[{number}]: out of range ({mask}); give a bit mask of at most {MAX_QUBITS} qubits"
            raise OperatorError(message, argument=name)
    return numbers


def _integer(value: object) -> int | None:
    if isinstance(value, bool) or not isinstance(value, numbers.Integral):
        return None
    return int(value)
