"""A candidate that is a user's own implementation: a function that evolves a state or returns a unitary."""

from __future__ import annotations

import inspect
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt

from trueturn._arrays import as_array
from trueturn.audit.base_candidate import BaseCandidate, Leg
from trueturn.audit.given_circuit import checked_name
from trueturn.errors import ArgumentError, AuditError
from trueturn.operator import Operator
from trueturn.state import State

__all__ = ["Apply", "Implementation"]

Apply: TypeAlias = Callable[[npt.NDArray[Any], float, int], Any]


@dataclass(frozen=True)
class Implementation(BaseCandidate):
    """A user's own implementation; made by `Candidate.from_callable`.

    Attributes
    ----------
    apply : callable
        ``apply(state, time, steps)`` returns the evolved amplitudes or the unitary matrix.
    name : str
    steps : int or "least"
    order : int

    Notes
    -----
    What the implementation computes is judged as it is, its own rounding included: the error interval is widened by the
    reference and by our expectation values only.
    """

    apply: Apply
    name: str = ""
    steps: int | str = 1
    order: int = 2

    def __post_init__(self) -> None:
        object.__setattr__(self, "name", checked_name(self.name))
        if not callable(self.apply):
            raise ArgumentError(
                f"apply: cannot be called ({self.apply!r}); give a function of (state, time, steps)",
                argument="apply",
                value=self.apply,
            )
        _require_signature(self.apply)
        if isinstance(self.order, bool) or not isinstance(self.order, int) or self.order < 1:
            raise ArgumentError(
                f"order: not a positive whole number ({self.order!r}); give 1 or more",
                argument="order",
                value=self.order,
            )

    def prepare(self, operator: Operator, times: Sequence[float]) -> None:
        """Nothing can be checked before the function runs."""

    def legs(self, partition: object, times: Sequence[float], counts: Sequence[int], along: bool) -> list[Leg]:
        """Return one leg for each time; see `BaseCandidate.legs`."""
        before = zip([0.0, *times[:-1]], [0, *counts[:-1]], strict=True) if along else [(0.0, 0)] * len(times)
        return [
            _CallLeg(self, time - was, count - done, not along)
            for time, count, (was, done) in zip(times, counts, before, strict=True)
        ]


def _require_signature(apply: Apply) -> None:
    """Refuse a function that three arguments do not fit; one that hides its signature is taken at its word."""
    try:
        signature = inspect.signature(apply)
    except (TypeError, ValueError):
        return
    try:
        signature.bind(None, 0.0, 1)
    except TypeError as error:
        raise ArgumentError(
            f"apply: does not take (state, time, steps) ({signature}: {error}); give a function of these three",
            argument="apply",
            value=apply,
        ) from None


@dataclass(frozen=True)
class _CallLeg:
    implementation: Implementation
    time: float
    steps: int
    fresh: bool

    @property
    def circuit(self) -> None:
        return None

    @property
    def angle_roundings(self) -> int:
        return 0

    def rounding(self, unit: float) -> float:
        return 0.0

    def run(self, state: State, threads: int) -> None:
        amplitudes = state.amplitudes
        returned = self.implementation.apply(amplitudes.copy(), self.time, self.steps)
        try:
            found = as_array(returned)
        except TypeError:
            raise self._refuse(f"no array ({type(returned).__name__})") from None
        if found.dtype.kind not in "fiuc":
            raise self._refuse(f"an array of {found.dtype}")
        size = amplitudes.size
        if found.shape == (size, size):
            found = found @ amplitudes
        elif found.shape != (size,):
            raise self._refuse(f"an array of the wrong shape {found.shape}")
        if not np.isfinite(found).all():
            raise self._refuse("amplitudes that are not finite")
        np.copyto(amplitudes, found, casting="same_kind")

    def _refuse(self, what: str) -> AuditError:
        return AuditError(
            f"candidates: {self.implementation.name!r} returned {what} for time {self.time:g} in {self.steps} steps; "
            "return 2**n amplitudes or a unitary matrix of that size",
            reason="an implementation returned no state",
            limit=None,
        )
