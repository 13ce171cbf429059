"""Arrays of other libraries, by the open protocols: DLPack, the array interface, the buffer protocol."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["as_array"]


def as_array(given: object) -> npt.NDArray[Any]:
    """Return an ndarray over the memory of the object given, without a copy wherever its protocol allows.

    Parameters
    ----------
    given : object
        An ndarray; or an object with ``__array_interface__``, ``__array__``, the buffer protocol or ``__dlpack__``.

    Raises
    ------
    TypeError
        It offers none of these, or its memory is not that of the processor.

    References
    ----------
    DLPack, "Python specification" of the array API standard (2022); NumPy's array interface, version 3. Common practice.
    """
    if isinstance(given, np.ndarray):
        return given
    protocols = ("__array_interface__", "__array_struct__", "__array__")
    if not any(hasattr(given, name) for name in protocols) and hasattr(given, "__dlpack__"):
        try:
            return np.from_dlpack(given)
        except (BufferError, RuntimeError, ValueError) as failure:
            raise TypeError(f"memory that cannot be shared: {failure}") from None
    try:
        found = np.asarray(given)
    except (TypeError, ValueError) as failure:
        raise TypeError(str(failure)) from None
    if found.dtype.kind == "O":
        raise TypeError(f"no array ({type(given).__name__})")
    return found
