"""What the samples of an average were measured with, so that no others are added to them."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from trueturn.operator import Operator
from trueturn.randomised.ensemble import Ensemble
from trueturn.randomised.truth import Truth
from trueturn.state import State

__all__ = ["Origin", "origin_of"]


@dataclass(frozen=True)
class Origin:
    """Everything that rows depend on; states as SHA-256 of their type and amplitudes.

    Attributes
    ----------
    ensemble : Ensemble
    observables : tuple of (str, Operator)
        In the order of the rows' columns.
    start : str
    truth : tuple or None
        Of the reference: time, state, bound on it, and its values and their bounds where it recorded an observable.
    """

    ensemble: Ensemble
    observables: tuple[tuple[str, Operator], ...]
    start: str
    truth: tuple[object, ...] | None

    def difference(self, other: Origin) -> str | None:
        """Name the first thing in which another origin is not the same, or None."""
        if self.ensemble != other.ensemble:
            return "ensemble"
        if self.observables != other.observables:
            return "observables"
        if self.start != other.start:
            return "start"
        return None if self.truth == other.truth else "reference"


def origin_of(ensemble: Ensemble, state: State, observables: Mapping[str, Operator], truth: Truth) -> Origin:
    """Note what an average is made with."""
    held = None
    if truth.state is not None:
        recorded = tuple(truth.expectation(name) for name in observables)
        held = (truth.time, _digest(truth.state), truth.state_bound, recorded)
    return Origin(ensemble, tuple(observables.items()), _digest(state), held)


def _digest(state: State) -> str:
    amplitudes = np.ascontiguousarray(state.amplitudes)
    found = hashlib.sha256(amplitudes.dtype.str.encode())
    found.update(amplitudes.view(np.uint8).data)
    return found.hexdigest()
