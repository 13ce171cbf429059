"""Arrays of other libraries, by the open protocols: the array interface, the buffer protocol, DLPack.

References: DLPack, "Python specification for DLPack" of the array API standard (2022); NumPy's "array interface protocol",
version 3; Python's buffer protocol (PEP 3118). Common practice.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["as_array", "shared_array"]

_INTERFACES = ("__array_interface__", "__array_struct__", "__array__")


def shared_array(given: object) -> npt.NDArray[Any] | None:
    """Return an ndarray over the memory of an object that shares it, or None for one that does not.

    Raises
    ------
    TypeError
        It offers its memory but cannot share it with the processor.
    """
    if isinstance(given, np.ndarray):
        return given
    if isinstance(given, memoryview) or any(hasattr(given, name) for name in _INTERFACES):
        return np.asarray(given)
    if not hasattr(given, "__dlpack__"):
        return None
    try:
        return np.from_dlpack(given)
    except (BufferError, RuntimeError, ValueError) as failure:
        raise TypeError(f"memory that cannot be shared: {failure}") from None


def as_array(given: object) -> npt.NDArray[Any]:
    """Return an ndarray over shared memory where there is any, else of a nested list of numbers.

    Raises
    ------
    TypeError
        It is neither.
    """
    shared = shared_array(given)
    if shared is not None:
        return shared
    try:
        found = np.asarray(given)
    except (TypeError, ValueError) as failure:
        raise TypeError(str(failure)) from None
    if found.dtype.kind == "O":
        raise TypeError(f"no array ({type(given).__name__})")
    return found
