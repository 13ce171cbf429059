"""How many threads a call may use."""

from __future__ import annotations

import contextvars
import os
from collections.abc import Iterator
from contextlib import contextmanager
from numbers import Integral

from trueturn.errors import ArgumentError

__all__ = ["resolve", "threads"]

_default: contextvars.ContextVar[int | None] = contextvars.ContextVar("trueturn_threads", default=None)
LIMIT = 1024


@contextmanager
def threads(n: int) -> Iterator[None]:
    """Set the number of threads for calls inside a ``with`` block that do not name their own.

    Parameters
    ----------
    n : int
        At least 1. Results never depend on it, only time does.

    Raises
    ------
    ArgumentError
        `n` is not a whole number from 1 to 1024.

    Examples
    --------
    >>> import trueturn as tt
    >>> with tt.threads(1):
    ...     state = tt.State.product("01")
    """
    token = _default.set(_checked(n, "n"))
    try:
        yield
    finally:
        _default.reset(token)


def resolve(asked: int | None) -> int:
    """Return the thread count of a call: its own, the ``with`` block's, ``TRUETURN_NUM_THREADS``, or all processors."""
    if asked is not None:
        return _checked(asked, "threads")
    inherited = _default.get()
    if inherited is not None:
        return inherited
    variable = os.environ.get("TRUETURN_NUM_THREADS", "")
    if variable:
        try:
            value = int(variable)
        except ValueError:
            value = 0
        return _checked(value, "TRUETURN_NUM_THREADS", shown=variable)
    try:
        return min(LIMIT, len(os.sched_getaffinity(0)))
    except AttributeError:  # not on every system
        return min(LIMIT, os.cpu_count() or 1)


def _checked(value: object, argument: str, shown: object = None) -> int:
    if isinstance(value, bool) or not isinstance(value, Integral) or not 1 <= int(value) <= LIMIT:
        found = value if shown is None else shown
        raise ArgumentError(
            f"{argument}: not a thread count ({found!r}); give a whole number from 1 to {LIMIT}",
            argument=argument,
            value=found,
        )
    return int(value)
