"""Room for state vectors, placed where the engine is fast."""

from __future__ import annotations

import contextlib
import mmap
from typing import Any

import numpy as np
import numpy.typing as npt

from trueturn import _native, _threads

__all__ = ["amplitudes"]

_LINE = 64
_PAGE = 1 << 21
_FROM = 2 * _PAGE


def amplitudes(count: int, dtype: npt.DTypeLike) -> npt.NDArray[Any]:
    """Return `count` amplitudes, all zero, the first at the start of a cache line.

    From 4 MiB on the array starts at a large page and large pages are asked for (2 MiB, where the system has them: fewer
    misses of address translation), and each worker touches its own share first, so that memory lies near its processor.
    Costs at most 2 MiB beyond the array.
    """
    kind = np.dtype(dtype)
    size = count * kind.itemsize
    boundary = _LINE if size < _FROM else _PAGE
    if size < _FROM:
        room = np.zeros(size + boundary, dtype=np.uint8)
    else:
        # Private: a shared mapping would be one memory with forked children, and gets no large pages.
        private = {"flags": mmap.MAP_PRIVATE | mmap.MAP_ANONYMOUS} if hasattr(mmap, "MAP_PRIVATE") else {}
        try:
            memory = mmap.mmap(-1, size + boundary, **private)
        except OSError as refused:
            raise MemoryError(f"the system refused {size + boundary} bytes ({refused})") from None
        if hasattr(mmap, "MADV_HUGEPAGE"):
            with contextlib.suppress(OSError):  # a kernel without them
                memory.madvise(mmap.MADV_HUGEPAGE)
        room = np.frombuffer(memory, dtype=np.uint8)
    start = -room.ctypes.data % boundary
    array = room[start : start + size].view(kind)
    if size >= _FROM:
        _native.clear(array, _threads.resolve(None))
    return array
